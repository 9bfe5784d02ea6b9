//! The periodic steady state under a periodic drive.
//!
//! Shooting (T. J. Aprille and T. N. Trick, "Steady-state analysis of nonlinear circuits with periodic inputs",
//! Proc. IEEE 60, 1972) on all charges and fluxes, with sensitivities carried along, over Radau IIA collocation. The
//! mesh is dyadic (every element is the period over a power of two, aligned), chosen by a local error estimate while
//! the shooting settles, then frozen; the result is the solution with every element bisected once more, and the change
//! that brings is its own error estimate. A point's mesh never depends on its neighbours.

use super::bank::PortBank;
use super::bias::OperatingPoint;
use super::error::EngineError;
use super::linear::{Linearised, Phasors};
use super::scheme::Radau;
use super::step::{Acceptance, State, StepSolver, clamp_prediction};
use crate::network::elements::EMF;
use crate::network::{Network, Reduction};
use crate::numeric::fourier::{Coefficient, UnevenPeriod};
use crate::numeric::{Factored, Matrix};
use std::collections::HashMap;

/// Positions in the period are counted in units of the period over 2 to this power.
const FINEST: u32 = 44;
/// Harmonics whose change under bisection is the error estimate.
pub const WATCHED_HARMONICS: usize = 20;

/// What is asked of a solution.
#[derive(Clone, Copy, Debug)]
pub struct PeriodicOptions {
    /// Largest change of H1…H20 relative to H1 when every element is bisected.
    pub tolerance: f64,
    /// Coarsest element: the period over 2 to this power.
    pub coarsest: u32,
    /// Local error of the first mesh, relative to the output's peak.
    pub first_local_error: f64,
}

impl Default for PeriodicOptions {
    fn default() -> Self {
        PeriodicOptions {
            tolerance: 3e-8,
            coarsest: 6,
            first_local_error: 3e-4,
        }
    }
}

/// One element of the mesh.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
struct Element {
    start: u64,
    level: u32,
}

impl Element {
    fn length(&self) -> u64 {
        1 << (FINEST - self.level)
    }
    fn end(&self) -> u64 {
        self.start + self.length()
    }
    /// Phase in [0, 1] at `position` in [0, 1] of the element.
    fn phase(&self, position: f64) -> f64 {
        (self.start as f64 + position * self.length() as f64) / (1u64 << FINEST) as f64
    }
    fn halves(&self) -> [Element; 2] {
        let level = self.level + 1;
        let first = Element {
            start: self.start,
            level,
        };
        [
            first,
            Element {
                start: first.end(),
                level,
            },
        ]
    }
}

/// One sweep over the period.
struct Pass {
    mesh: Vec<Element>,
    /// Port voltages, stage-major, element after element.
    ports: Vec<f64>,
    /// Outputs, stage after stage.
    outputs: Vec<f64>,
    end: State<f64>,
    /// ∂end/∂start, where asked for.
    map: Option<Matrix<f64>>,
    /// Largest magnitude each state took.
    scales: Vec<f64>,
}

/// A periodic steady state.
#[derive(Clone, Debug)]
pub struct PeriodicSolution {
    /// State at phase zero.
    pub start: State<f64>,
    /// Phases of the samples in (0, 1].
    pub phases: Vec<f64>,
    /// Quadrature weights, summing to one.
    pub weights: Vec<f64>,
    /// Output deviation from bias at the samples, V.
    pub outputs: Vec<f64>,
    /// Port voltages (deviations, V) at the samples, port-minor.
    pub ports: Vec<f64>,
    /// Mesh: start phase and length of each element.
    pub elements: Vec<(f64, f64)>,
    /// Stages an element.
    pub stages: usize,
    /// Largest change of H1…H20 relative to H1 under bisection.
    pub error_estimate: f64,
    /// Magnitude of the largest Floquet multiplier.
    pub largest_multiplier: f64,
    /// Whether the base-charge denominator of some transistor left its straight line.
    pub beyond_early_range: bool,
}

impl PeriodicSolution {
    /// rms of the output's deviation from bias, V.
    pub fn rms(&self) -> f64 {
        self.weights
            .iter()
            .zip(&self.outputs)
            .map(|(w, y)| w * y * y)
            .sum::<f64>()
            .sqrt()
    }

    /// The output on `size` even points of the period from phase zero, V, by the collocation polynomials.
    pub fn even_grid(&self, size: usize) -> Vec<f64> {
        let radau = Radau::new(self.stages);
        let mut grid = Vec::with_capacity(size);
        let mut element = 0;
        for k in 0..size {
            let phase = k as f64 / size as f64;
            while element + 1 < self.elements.len() && self.elements[element + 1].0 <= phase {
                element += 1;
            }
            let (start, length) = self.elements[element];
            let first = element * self.stages;
            let before = if first == 0 {
                self.outputs.len() - 1
            } else {
                first - 1
            };
            let values = std::iter::once(&self.outputs[before])
                .chain(&self.outputs[first..first + self.stages]);
            let weights = radau.reading((phase - start) / length);
            grid.push(weights.iter().zip(values).map(|(w, y)| w * y).sum());
        }
        grid
    }
}

/// The periodic drive: EMF of unit amplitude against phase in [0, 1].
pub type UnitDrive<'a> = &'a (dyn Fn(f64) -> f64 + Sync);

/// Solves one stage at one fundamental frequency.
pub struct PeriodicSolver<'a> {
    network: &'a Network,
    bank: PortBank<f64>,
    radau: Radau,
    frequency: f64,
    options: PeriodicOptions,
    phasors: Phasors,
    reductions: HashMap<u32, Reduction<f64>>,
    readings: HashMap<i32, Vec<Vec<f64>>>,
    stepper: StepSolver<f64>,
    /// Largest output of the last sweep at this level, by which the next one judges its local error.
    output_peak: Option<f64>,
}

impl<'a> PeriodicSolver<'a> {
    /// A solver for `network` at `point`, driven periodically at `frequency` in Hz.
    ///
    /// # Errors
    /// Where the linearised network is singular.
    pub fn new(
        network: &'a Network,
        point: &OperatingPoint,
        frequency: f64,
        options: PeriodicOptions,
    ) -> Result<Self, EngineError> {
        let radau = Radau::new(3);
        let bank = point.bank(network);
        let phasors = Linearised::at(network, point)
            .phasors(frequency)
            .ok_or(EngineError::Undetermined)?;
        Ok(PeriodicSolver {
            network,
            stepper: StepSolver::new(&bank, radau.stages()),
            bank,
            radau,
            frequency,
            options,
            phasors,
            reductions: HashMap::new(),
            readings: HashMap::new(),
            output_peak: None,
        })
    }

    /// Small-signal gain magnitude at the fundamental.
    pub fn small_signal_gain(&self) -> f64 {
        self.phasors.output.norm()
    }

    /// The steady state under a sine of `amplitude` V peak, started from `guess` (the state at phase zero of a
    /// neighbouring level) or from the linear response.
    ///
    /// # Errors
    /// Where no fallback converges, or the state found is unstable.
    pub fn sine(
        &mut self,
        amplitude: f64,
        guess: Option<&State<f64>>,
    ) -> Result<PeriodicSolution, EngineError> {
        self.solve(
            &|phase| (std::f64::consts::TAU * phase).sin(),
            amplitude,
            guess,
        )
    }

    /// The steady state under `amplitude` times `unit`.
    ///
    /// # Errors
    /// As for [`PeriodicSolver::sine`].
    pub fn solve(
        &mut self,
        unit: UnitDrive,
        amplitude: f64,
        guess: Option<&State<f64>>,
    ) -> Result<PeriodicSolution, EngineError> {
        let linear = self.linear_start(amplitude);
        let start = guess.unwrap_or(&linear);
        if let Ok(found) = self.settle(unit, amplitude, start) {
            return Ok(found);
        }
        self.continue_in_level(unit, amplitude)
    }

    /// Raise the level from where the linear response is a good start.
    fn continue_in_level(
        &mut self,
        unit: UnitDrive,
        amplitude: f64,
    ) -> Result<PeriodicSolution, EngineError> {
        let mut level = amplitude / 1024.0;
        let mut state = self.linear_start(level);
        let mut done = 0.0;
        let mut factor = 2.0f64;
        let mut last = EngineError::Undetermined;
        for _ in 0..400 {
            match self.settle(unit, level, &state) {
                Ok(solution) if level >= amplitude => return Ok(solution),
                Ok(solution) => {
                    state = solution.start;
                    done = level;
                    factor = factor.powf(1.3).min(2.0);
                }
                Err(error) => {
                    last = error;
                    factor = factor.sqrt();
                }
            }
            if done == 0.0 {
                level /= 4.0;
                state = self.linear_start(level);
                if level < amplitude * 1e-9 {
                    break;
                }
            } else if factor < 1.0005 {
                break;
            } else {
                level = (done * factor).min(amplitude);
            }
        }
        Err(last)
    }

    /// The linear response at phase zero to a sine of `amplitude` V peak: the imaginary parts of the phasors.
    fn linear_start(&self, amplitude: f64) -> State<f64> {
        State {
            linear: self
                .phasors
                .linear
                .iter()
                .map(|phasor| amplitude * phasor.im)
                .collect(),
            charge: self
                .phasors
                .charges
                .iter()
                .map(|phasor| amplitude * phasor.im)
                .collect(),
        }
    }

    /// Find the steady state near `start`, refining the mesh until bisection changes little.
    fn settle(
        &mut self,
        unit: UnitDrive,
        amplitude: f64,
        start: &State<f64>,
    ) -> Result<PeriodicSolution, EngineError> {
        let mut local_error = self.options.first_local_error;
        let mut start = start.clone();
        let mut best: Option<PeriodicSolution> = None;
        self.output_peak = None;
        for _ in 0..7 {
            let drive = |phase: f64| amplitude * unit(phase);
            let mesh = self.shoot_adaptively(&drive, amplitude, &mut start, local_error)?;
            let coarse = self.shoot(&drive, amplitude, &mut start, &mesh, None)?;
            let fine_mesh: Vec<Element> = mesh.iter().flat_map(Element::halves).collect();
            let mut fine_start = start.clone();
            let fine = self.shoot(
                &drive,
                amplitude,
                &mut fine_start,
                &fine_mesh,
                coarse.map.as_ref(),
            )?;
            let change = self.change(&coarse, &fine);
            if std::env::var_os("TRACE").is_some() {
                eprintln!("bisection changes {change:.3e}");
            }
            let solution = self.solution(fine, fine_start, coarse.map.as_ref(), change);
            if best
                .as_ref()
                .is_none_or(|best| change < best.error_estimate)
            {
                best = Some(solution);
            }
            if change <= self.options.tolerance {
                break;
            }
            // the order of the method turns the excess into a factor of the local error
            local_error *= (0.3 * self.options.tolerance / change).clamp(1e-3, 0.2);
        }
        let best = best.ok_or(EngineError::Undetermined)?;
        if best.largest_multiplier > 1.0 + 1e-6 {
            return Err(EngineError::UnstablePeriod {
                level: amplitude,
                frequency: self.frequency,
                multiplier: best.largest_multiplier,
            });
        }
        if best.error_estimate > 1e-4 || best.error_estimate.is_nan() {
            return Err(self.no_period(amplitude, "the mesh could not be refined enough"));
        }
        Ok(best)
    }

    fn no_period(&self, level: f64, reason: &str) -> EngineError {
        EngineError::NoPeriod {
            level,
            frequency: self.frequency,
            reason: reason.to_string(),
        }
    }

    /// Shoot with a mesh chosen anew in every pass until the start is nearly periodic; returns the last mesh.
    fn shoot_adaptively(
        &mut self,
        drive: UnitDrive,
        amplitude: f64,
        start: &mut State<f64>,
        local_error: f64,
    ) -> Result<Vec<Element>, EngineError> {
        let mut last = f64::INFINITY;
        for sweep in 0..25 {
            let first_scale = self.output_peak.is_none();
            let pass = self.pass(
                drive,
                amplitude,
                start,
                Mesh::Adaptive { local_error },
                true,
            )?;
            let change = self.newton_update(&pass, start, pass.map.as_ref())?;
            if std::env::var_os("TRACE").is_some() {
                eprintln!(
                    "adaptive {local_error:.1e}: {} elements, change {change:.3e}",
                    pass.mesh.len()
                );
            }
            if !change.is_finite() {
                return Err(self.no_period(amplitude, "the shooting diverged"));
            }
            if !first_scale
                && (change < 1e-3 || (sweep > 2 && change < 0.05 && change > 0.5 * last))
            {
                return Ok(pass.mesh);
            }
            last = change;
        }
        Err(self.no_period(amplitude, "the shooting did not settle"))
    }

    /// Shoot on a fixed mesh to rounding. `known` is a map from a coarser mesh, good enough for a first update.
    fn shoot(
        &mut self,
        drive: UnitDrive,
        amplitude: f64,
        start: &mut State<f64>,
        mesh: &[Element],
        known: Option<&Matrix<f64>>,
    ) -> Result<Pass, EngineError> {
        let mut last = f64::INFINITY;
        let mut map: Option<Matrix<f64>> = known.cloned();
        for iteration in 0..12 {
            let sensitive = map.is_none();
            let mut pass = self.pass(drive, amplitude, start, Mesh::Fixed(mesh), sensitive)?;
            if let Some(fresh) = pass.map.take() {
                map = Some(fresh);
            }
            let change = self.newton_update(&pass, start, map.as_ref())?;
            if std::env::var_os("TRACE").is_some() {
                eprintln!(
                    "  fixed: {} elements, change {change:.3e}, map {sensitive}",
                    mesh.len()
                );
            }
            if !change.is_finite() {
                return Err(self.no_period(amplitude, "the shooting diverged"));
            }
            if change < 1e-11 || (iteration > 2 && change < 1e-7 && change > 0.3 * last) {
                pass.map = map;
                return Ok(pass);
            }
            // a map from a coarser mesh or an earlier start is renewed as soon as it stops converging fast
            if change > 0.02 * last || change > 1e-4 {
                map = None;
            }
            last = change;
        }
        Err(self.no_period(amplitude, "the shooting did not settle on its mesh"))
    }

    /// Move `start` by the Newton correction of the shooting; returns its size relative to the states' own size.
    fn newton_update(
        &self,
        pass: &Pass,
        start: &mut State<f64>,
        map: Option<&Matrix<f64>>,
    ) -> Result<f64, EngineError> {
        let size = start.len();
        let scales = self.state_scales();
        let mut matrix = Matrix::zero(size, size);
        for row in 0..size {
            for column in 0..size {
                let carried = map.map_or(0.0, |map| map[(row, column)]);
                let identity = if row == column { 1.0 } else { 0.0 };
                matrix[(row, column)] = identity - carried * scales[column] / scales[row];
            }
        }
        let mut update: Vec<f64> = pass
            .end
            .iter()
            .zip(start.iter())
            .zip(&scales)
            .map(|((end, start), scale)| (end - start) / scale)
            .collect();
        let factored = Factored::of(&matrix).or_else(|_| {
            // a floating charge keeps what it started with: its own direction is left alone
            for k in 0..size {
                matrix[(k, k)] += 1e-12;
            }
            Factored::of(&matrix)
        });
        factored
            .map_err(|_| EngineError::Undetermined)?
            .solve(&mut update);
        let largest_state = pass
            .scales
            .iter()
            .zip(&scales)
            .map(|(state, scale)| state / scale)
            .fold(0.0, f64::max);
        let mut change = 0.0f64;
        for ((value, update), scale) in start.iter_mut().zip(&update).zip(&scales) {
            *value += update * scale;
            change = change.max(update.abs());
            if !update.is_finite() {
                change = f64::NAN;
                break;
            }
        }
        Ok(if largest_state > 0.0 {
            change / largest_state
        } else {
            change
        })
    }

    /// A charge or flux that one volt or one milliampere stands for, by which states become comparable.
    fn state_scales(&self) -> Vec<f64> {
        let capacitors = self.network.capacitors.iter().map(|element| element.farads);
        let inductors = self
            .network
            .inductors
            .iter()
            .map(|element| element.henries * 1e-3);
        let ports = (0..self.bank.ports()).map(|_| 1e-11);
        capacitors.chain(inductors).chain(ports).collect()
    }

    /// Largest difference of H1…H20 relative to H1.
    fn change(&self, coarse: &Pass, fine: &Pass) -> f64 {
        let a = self.harmonics(coarse);
        let b = self.harmonics(fine);
        let reference = b[0].peak();
        let largest = a
            .iter()
            .zip(&b)
            .map(|(a, b)| a.distance(b))
            .fold(0.0, f64::max);
        if reference > 0.0 {
            largest / reference
        } else {
            0.0
        }
    }

    fn harmonics(&self, pass: &Pass) -> Vec<Coefficient> {
        let (phases, weights) = self.samples(&pass.mesh);
        UnevenPeriod::new(&phases, weights)
            .spectrum(&pass.outputs, WATCHED_HARMONICS)
            .harmonics
    }

    fn samples(&self, mesh: &[Element]) -> (Vec<f64>, Vec<f64>) {
        let whole = (1u64 << FINEST) as f64;
        let mut phases = Vec::with_capacity(mesh.len() * self.radau.stages());
        let mut weights = Vec::with_capacity(phases.capacity());
        for element in mesh {
            let share = element.length() as f64 / whole;
            for (node, weight) in self.radau.nodes.iter().zip(&self.radau.weights) {
                phases.push(element.phase(*node));
                weights.push(share * weight);
            }
        }
        (phases, weights)
    }

    fn solution(
        &self,
        pass: Pass,
        start: State<f64>,
        map: Option<&Matrix<f64>>,
        error_estimate: f64,
    ) -> PeriodicSolution {
        let (phases, weights) = self.samples(&pass.mesh);
        let whole = (1u64 << FINEST) as f64;
        let ports = self.bank.ports().max(1);
        PeriodicSolution {
            start,
            phases,
            weights,
            outputs: pass.outputs,
            beyond_early_range: pass
                .ports
                .chunks_exact(ports)
                .any(|v| self.bank.beyond_early_range(v)),
            ports: pass.ports,
            elements: pass
                .mesh
                .iter()
                .map(|element| {
                    (
                        element.start as f64 / whole,
                        element.length() as f64 / whole,
                    )
                })
                .collect(),
            stages: self.radau.stages(),
            error_estimate,
            largest_multiplier: map.map_or(0.0, |map| self.largest_multiplier(map)),
        }
    }

    fn largest_multiplier(&self, map: &Matrix<f64>) -> f64 {
        let scales = self.state_scales();
        let matrix = nalgebra::DMatrix::from_fn(map.rows(), map.columns(), |row, column| {
            map[(row, column)] * scales[column] / scales[row]
        });
        if matrix.nrows() == 0 || matrix.iter().any(|value| !value.is_finite()) {
            return 0.0;
        }
        matrix
            .complex_eigenvalues()
            .iter()
            .map(|value| value.norm())
            .fold(0.0, f64::max)
    }

    /// One sweep over the period from `start`.
    fn pass(
        &mut self,
        drive: UnitDrive,
        amplitude: f64,
        start: &State<f64>,
        mesh: Mesh,
        sensitive: bool,
    ) -> Result<Pass, EngineError> {
        Sweep::new(self, drive, amplitude, start, sensitive).run(mesh)
    }

    fn reduction(&mut self, level: u32) -> Result<(), EngineError> {
        if !self.reductions.contains_key(&level) {
            let step = 1.0 / (self.frequency * 2f64.powi(level as i32));
            let reduction = Reduction::of(self.network, EMF, &self.radau.scheme(step))
                .map_err(|_| EngineError::Undetermined)?;
            self.reductions.insert(level, reduction);
        }
        Ok(())
    }

    /// Weights that extrapolate an element's polynomial to the stages of the next one, which is 2^`ratio` times as long.
    fn reading(&mut self, ratio: i32) -> &[Vec<f64>] {
        let radau = &self.radau;
        self.readings.entry(ratio).or_insert_with(|| {
            radau
                .nodes
                .iter()
                .map(|node| radau.reading(1.0 + 2f64.powi(ratio) * node))
                .collect()
        })
    }
}

enum Mesh<'m> {
    Fixed(&'m [Element]),
    Adaptive { local_error: f64 },
}

/// The state of one sweep.
struct Sweep<'s, 'a> {
    solver: &'s mut PeriodicSolver<'a>,
    drive: UnitDrive<'s>,
    state: State<f64>,
    end: State<f64>,
    pass: Pass,
    /// Port voltages and output at the start of the current element; none at phase zero.
    v_start: Option<Vec<f64>>,
    y_start: f64,
    /// The last accepted element's values: (start, stages) for each port and for the output.
    previous: Option<(Element, Vec<f64>, Vec<f64>)>,
    v: Vec<f64>,
    predicted: Vec<f64>,
    y: Vec<f64>,
    y_predicted: Vec<f64>,
    forcing: Vec<f64>,
    v_scale: f64,
    y_scale: f64,
}

impl<'s, 'a> Sweep<'s, 'a> {
    fn new(
        solver: &'s mut PeriodicSolver<'a>,
        drive: UnitDrive<'s>,
        amplitude: f64,
        start: &State<f64>,
        sensitive: bool,
    ) -> Self {
        let stages = solver.radau.stages();
        let ports = solver.bank.ports();
        let v_scale = solver
            .phasors
            .ports
            .iter()
            .map(|phasor| phasor.norm())
            .fold(0.0, f64::max)
            * amplitude;
        // before any sweep has shown how large the output is, the running peak serves, from a small share of the
        // linear response
        let y_scale = solver
            .output_peak
            .unwrap_or(1e-3 * solver.phasors.output.norm() * amplitude);
        Sweep {
            pass: Pass {
                mesh: Vec::new(),
                ports: Vec::new(),
                outputs: Vec::new(),
                end: start.clone(),
                map: sensitive.then(|| Matrix::identity(start.len())),
                scales: start.iter().map(|value| value.abs()).collect(),
            },
            state: start.clone(),
            end: start.clone(),
            v_start: None,
            y_start: 0.0,
            previous: None,
            v: vec![0.0; stages * ports],
            predicted: vec![0.0; stages * ports],
            y: vec![0.0; stages],
            y_predicted: vec![0.0; stages],
            forcing: vec![0.0; stages],
            // a drive into clipping takes the junctions further than the linear response; a few widths is where the
            // exponential saturates the scale that rounding is judged by
            v_scale: v_scale.min(0.1),
            y_scale,
            solver,
            drive,
        }
    }

    fn run(mut self, mesh: Mesh) -> Result<Pass, EngineError> {
        match mesh {
            Mesh::Fixed(elements) => {
                for element in elements {
                    if !self.attempt(*element)? {
                        return Err(self.no_step(*element));
                    }
                    self.accept(*element);
                }
            }
            Mesh::Adaptive { local_error } => self.run_adaptively(local_error)?,
        }
        let peak = self
            .pass
            .outputs
            .iter()
            .fold(0.0, |peak: f64, y| peak.max(y.abs()));
        self.solver.output_peak = Some(peak.max(f64::MIN_POSITIVE));
        self.pass.end = self.state;
        Ok(self.pass)
    }

    fn run_adaptively(&mut self, local_error: f64) -> Result<(), EngineError> {
        let coarsest = self.solver.options.coarsest;
        let growth = 0.6 * 0.5f64.powi(self.solver.radau.stages() as i32 + 1);
        let mut element = Element {
            start: 0,
            level: coarsest + 2,
        };
        while element.start < 1 << FINEST {
            let error = if self.attempt(element)? {
                self.local_error(local_error)
            } else {
                f64::INFINITY
            };
            if std::env::var_os("TRACE2").is_some() {
                eprintln!(
                    "L{} at {:.12} err {error:.3e} v {:?} pred {:?} y {:?} yp {:?} it {}",
                    element.level,
                    element.phase(0.0),
                    self.v,
                    self.predicted,
                    self.y,
                    self.y_predicted,
                    self.solver.stepper.iterations
                );
            }
            if error > 1.0 && element.level < FINEST - 4 {
                element.level += if error > 256.0 { 2 } else { 1 };
                element.level = element.level.min(FINEST - 4);
                continue;
            }
            if error == f64::INFINITY {
                return Err(self.no_step(element));
            }
            if self.pass.mesh.len() >= MOST_ELEMENTS {
                if std::env::var_os("TRACE").is_some() {
                    let mut count = std::collections::BTreeMap::new();
                    for e in &self.pass.mesh {
                        *count.entry(e.level).or_insert(0) += 1;
                    }
                    eprintln!("levels {count:?} at phase {}", element.phase(0.0));
                    for e in &self.pass.mesh[19990..] {
                        eprint!(" {}", e.level);
                    }
                    let n = self.pass.outputs.len();
                    let p = self.pass.ports.len();
                    eprintln!(
                        "\ny {:?} v {:?} anchor {:?} predicted {:?} {:?} yscale {}",
                        &self.pass.outputs[n - 6..],
                        &self.pass.ports[p - 6..],
                        self.solver.bank.anchor(),
                        self.predicted,
                        self.y_predicted,
                        self.y_scale
                    );
                }
                return Err(self
                    .solver
                    .no_period(self.y_scale, "the mesh grew beyond bounds"));
            }
            self.accept(element);
            let mut next = Element {
                start: element.end(),
                level: element.level,
            };
            if error < growth
                && next.level > coarsest
                && next.start.is_multiple_of(2 * next.length())
            {
                next.level -= 1;
            }
            element = next;
        }
        Ok(())
    }

    fn no_step(&self, element: Element) -> EngineError {
        EngineError::NoStep {
            time: element.phase(0.0) / self.solver.frequency,
            part: self.solver.network.port_name(0).to_string(),
        }
    }

    /// Solve one element; false where Newton's method fails.
    fn attempt(&mut self, element: Element) -> Result<bool, EngineError> {
        self.solver.reduction(element.level)?;
        self.predict(element);
        for (stage, value) in self.forcing.iter_mut().enumerate() {
            *value = (self.drive)(element.phase(self.solver.radau.nodes[stage]));
        }
        let acceptance = Acceptance {
            leftover: 1e-15 * self.v_scale,
        };
        let reduction = &self.solver.reductions[&element.level];
        let solved = self.solver.stepper.solve(
            &self.solver.bank,
            reduction,
            &self.state,
            &self.forcing,
            &mut self.v,
            acceptance,
        );
        if solved.is_err() {
            return Ok(false);
        }
        self.solver
            .stepper
            .outputs(reduction, &self.state, &self.forcing, &mut self.y);
        Ok(true)
    }

    /// Guess the element's port voltages and outputs by the polynomial of the element before.
    fn predict(&mut self, element: Element) {
        let ports = self.solver.bank.ports();
        let stages = self.solver.radau.stages();
        let Some((last, values, outputs)) = &self.previous else {
            self.v.fill(0.0);
            return;
        };
        let ratio = last.level as i32 - element.level as i32;
        let reading = self.solver.reading(ratio).to_vec();
        for (stage, weights) in reading.iter().enumerate() {
            for port in 0..ports {
                let value: f64 = weights
                    .iter()
                    .enumerate()
                    .map(|(k, w)| w * values[k * ports + port])
                    .sum();
                self.predicted[stage * ports + port] = value;
                let now = values[stages * ports + port];
                self.v[stage * ports + port] =
                    clamp_prediction(&self.solver.bank, port, now, value);
            }
            self.y_predicted[stage] = weights.iter().zip(outputs).map(|(w, y)| w * y).sum();
        }
    }

    /// How far the element's values lie from the extrapolation, in units of what is allowed: the interpolation error
    /// of the element is a small, nearly constant share of that distance.
    fn local_error(&self, allowed: f64) -> f64 {
        if self.previous.is_none() {
            return 0.5;
        }
        let output = self
            .y
            .iter()
            .zip(&self.y_predicted)
            .map(|(y, predicted)| (y - predicted).abs())
            .fold(0.0, f64::max);
        let ports = self.solver.bank.ports();
        let limits = self.solver.bank.limits();
        let port_error = self
            .v
            .iter()
            .zip(&self.predicted)
            .enumerate()
            .map(|(k, (v, predicted))| (v - predicted).abs() / limits[k % ports].width)
            .fold(0.0, f64::max);
        (output / (allowed * self.y_scale)).max(port_error / PORT_ERROR)
    }

    fn accept(&mut self, element: Element) {
        let ports = self.solver.bank.ports();
        let stages = self.solver.radau.stages();
        let reduction = &self.solver.reductions[&element.level];
        self.solver
            .stepper
            .end_state(reduction, &self.state, &self.forcing, &mut self.end);
        if let Some(map) = &mut self.pass.map {
            self.solver
                .stepper
                .carry_sensitivity(&self.solver.bank, reduction, map);
        }
        std::mem::swap(&mut self.state, &mut self.end);
        for (scale, value) in self.pass.scales.iter_mut().zip(self.state.iter()) {
            *scale = scale.max(value.abs());
        }
        let mut values = Vec::with_capacity((stages + 1) * ports);
        let mut outputs = Vec::with_capacity(stages + 1);
        match self.v_start.take() {
            Some(v_start) => {
                values.extend(v_start);
                outputs.push(self.y_start);
            }
            None => {
                // nothing is known at phase zero: continue the stages' own polynomial back to it
                let back = lagrange_to_zero(&self.solver.radau.nodes);
                for port in 0..ports {
                    values.push(
                        back.iter()
                            .enumerate()
                            .map(|(k, w)| w * self.v[k * ports + port])
                            .sum(),
                    );
                }
                outputs.push(back.iter().zip(&self.y).map(|(w, y)| w * y).sum());
            }
        }
        values.extend(&self.v);
        outputs.extend(&self.y);
        self.v_start = Some(self.v[(stages - 1) * ports..].to_vec());
        self.y_start = self.y[stages - 1];
        self.y_scale = self
            .y
            .iter()
            .fold(self.y_scale, |scale, y| scale.max(y.abs()));
        self.pass.mesh.push(element);
        self.pass.ports.extend(&self.v);
        self.pass.outputs.extend(&self.y);
        self.previous = Some((element, values, outputs));
    }
}

/// Most elements of one period.
const MOST_ELEMENTS: usize = 20_000;
/// Distance from the extrapolation allowed at a port, in widths of its exponential.
const PORT_ERROR: f64 = 0.3;

fn lagrange_to_zero(nodes: &[f64]) -> Vec<f64> {
    (0..nodes.len())
        .map(|j| {
            (0..nodes.len())
                .filter(|&k| k != j)
                .map(|k| (0.0 - nodes[k]) / (nodes[j] - nodes[k]))
                .product()
        })
        .collect()
}
