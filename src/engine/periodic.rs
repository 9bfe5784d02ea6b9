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
    /// States at phase zero and at the end of every element, one row each.
    states: Vec<State<f64>>,
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
        let drive = |phase: f64| amplitude * unit(phase);
        let mut start = start.clone();
        let mut best: Option<PeriodicSolution> = None;
        self.output_peak = None;
        let mut mesh = self.shoot_adaptively(&drive, amplitude, &mut start)?;
        for _ in 0..MOST_REFINEMENTS {
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
                eprintln!("bisection of {} changes {change:.3e}", mesh.len());
            }
            let better = best
                .as_ref()
                .is_none_or(|best| change < best.error_estimate);
            if change > self.options.tolerance {
                mesh = self.refined(&drive, amplitude, &coarse)?;
            }
            if better {
                start = fine_start.clone();
                best = Some(self.solution(fine, fine_start, coarse.map.as_ref(), change));
            }
            if change <= self.options.tolerance || mesh.len() > MOST_ELEMENTS {
                break;
            }
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
    ) -> Result<Vec<Element>, EngineError> {
        let local_error = self.options.first_local_error;
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

    /// The mesh of `coarse` with those elements bisected that carry its error.
    fn refined(
        &mut self,
        drive: UnitDrive,
        amplitude: f64,
        coarse: &Pass,
    ) -> Result<Vec<Element>, EngineError> {
        let effects = self.effects(drive, amplitude, coarse)?;
        let limit = refinement_limit(&effects, REFINEMENT_SHARE * self.options.tolerance);
        if std::env::var_os("TRACE").is_some() {
            let sum: f64 = effects.iter().sum();
            eprintln!(
                "effects {sum:.3e}, {} above {limit:.3e}",
                effects.iter().filter(|d| **d > limit).count()
            );
        }
        let mut mesh = Vec::with_capacity(coarse.mesh.len() * 2);
        for (element, effect) in coarse.mesh.iter().zip(&effects) {
            if *effect <= limit || element.level >= FINEST_LEVEL {
                mesh.push(*element);
            } else if *effect > 64.0 * limit && element.level + 1 < FINEST_LEVEL {
                mesh.extend(element.halves().iter().flat_map(Element::halves));
            } else {
                mesh.extend(element.halves());
            }
        }
        Ok(mesh)
    }

    /// For each element of `coarse`, how far the harmonics move, relative to H1, when it alone is bisected.
    ///
    /// The element's own defects (how its end state and its share of each harmonic move) are weighed with the
    /// sensitivity of the harmonics to the state at that moment, found backwards through the period: a dual-weighted
    /// residual (R. Becker and R. Rannacher, "An optimal control approach to a posteriori error estimation in finite
    /// element methods", Acta Numerica 10, 2001). A charge out of balance by a millionth matters little in itself and
    /// much in a capacitor that takes a thousand periods to lose it; only the weights know.
    fn effects(
        &mut self,
        drive: UnitDrive,
        amplitude: f64,
        coarse: &Pass,
    ) -> Result<Vec<f64>, EngineError> {
        let defects = self.defects(drive, amplitude, coarse)?;
        let size = coarse.end.len();
        let rows = 2 * WEIGHED_HARMONICS;
        let whole = defects.iter().fold(Matrix::identity(size), |map, defect| {
            defect.map.product(&map)
        });
        let backwards = |terminal: Matrix<f64>| {
            let mut weights = vec![terminal];
            for defect in defects.iter().rev() {
                let after = &weights[weights.len() - 1];
                let mut before = after.product(&defect.map);
                for row in 0..rows {
                    for (value, own) in before
                        .row_mut(row)
                        .iter_mut()
                        .zip(defect.output_map.row(row))
                    {
                        *value += own;
                    }
                }
                weights.push(before);
            }
            weights.reverse();
            weights
        };
        // what the start of the period does to the harmonics, then what a kick does by moving that start for good
        let from_start = backwards(Matrix::zero(rows, size)).swap_remove(0);
        let weights = backwards(self.settle_rows(&from_start, &whole)?);
        let reference = self.harmonics(coarse)[0].peak().max(f64::MIN_POSITIVE);
        Ok(defects
            .iter()
            .zip(&weights[1..])
            .map(|(defect, weights)| {
                let mut largest = 0.0f64;
                for row in 0..rows {
                    let moved: f64 = weights
                        .row(row)
                        .iter()
                        .zip(&defect.state)
                        .map(|(w, e)| w * e)
                        .sum();
                    largest = largest.max((moved + defect.harmonics[row]).abs());
                }
                largest / reference
            })
            .collect())
    }

    /// R·(I − Φ)⁻¹ for the rows R and the map Φ of a whole period.
    fn settle_rows(
        &self,
        rows: &Matrix<f64>,
        whole: &Matrix<f64>,
    ) -> Result<Matrix<f64>, EngineError> {
        let scales = self.state_scales();
        let size = whole.rows();
        let mut transposed = Matrix::zero(size, size);
        for row in 0..size {
            for column in 0..size {
                let identity = if row == column { 1.0 } else { 0.0 };
                transposed[(column, row)] =
                    identity - whole[(row, column)] * scales[column] / scales[row];
            }
        }
        let factored = factor_or_shift(&mut transposed)?;
        let mut result = Matrix::zero(rows.rows(), size);
        for row in 0..rows.rows() {
            let mut x: Vec<f64> = rows
                .row(row)
                .iter()
                .zip(&scales)
                .map(|(r, scale)| r * scale)
                .collect();
            factored.solve(&mut x);
            for ((into, x), scale) in result.row_mut(row).iter_mut().zip(&x).zip(&scales) {
                *into = x / scale;
            }
        }
        Ok(result)
    }

    /// Solve each element of `coarse` in two halves from its own start.
    fn defects(
        &mut self,
        drive: UnitDrive,
        amplitude: f64,
        coarse: &Pass,
    ) -> Result<Vec<Defect>, EngineError> {
        let stages = self.radau.stages();
        let ports = self.bank.ports();
        let (nodes, weights) = (self.radau.nodes.clone(), self.radau.weights.clone());
        let inside: [Vec<Vec<f64>>; 2] = [0.0, 0.5].map(|first| {
            self.radau
                .nodes
                .iter()
                .map(|node| self.radau.reading(first + 0.5 * node))
                .collect()
        });
        let size = coarse.end.len();
        let mut sweep = Sweep::new(self, drive, amplitude, &coarse.states[0], false);
        let mut defects = Vec::with_capacity(coarse.mesh.len());
        for (k, element) in coarse.mesh.iter().enumerate() {
            let own = &coarse.ports[k * stages * ports..(k + 1) * stages * ports];
            let before = if k == 0 { coarse.mesh.len() - 1 } else { k - 1 };
            let last =
                &coarse.ports[((before + 1) * stages - 1) * ports..(before + 1) * stages * ports];
            let mut defect = Defect::new(size);
            sweep.state.clone_from(&coarse.states[k]);
            for (half, reading) in element.halves().iter().zip(&inside) {
                for (stage, weights) in reading.iter().enumerate() {
                    for port in 0..ports {
                        let inner: f64 = (0..stages)
                            .map(|j| weights[j + 1] * own[j * ports + port])
                            .sum();
                        sweep.v[stage * ports + port] = weights[0] * last[port] + inner;
                    }
                }
                if !sweep.solve(*half)? {
                    return Err(sweep.no_step(*half));
                }
                let mut dy = Matrix::zero(stages, size);
                let mut own_map = Matrix::identity(size);
                sweep.advance_carrying(*half, &mut own_map, Some(&mut dy));
                let dy = dy.product(&defect.map);
                defect.map = own_map.product(&defect.map);
                for stage in 0..stages {
                    defect.add_output(
                        half,
                        nodes[stage],
                        weights[stage],
                        sweep.y[stage],
                        Some(dy.row(stage)),
                    );
                }
            }
            for stage in 0..stages {
                defect.add_output(
                    element,
                    nodes[stage],
                    -weights[stage],
                    coarse.outputs[k * stages + stage],
                    None,
                );
            }
            for ((defect, now), then) in defect
                .state
                .iter_mut()
                .zip(sweep.state.iter())
                .zip(coarse.states[k + 1].iter())
            {
                *defect = now - then;
            }
            defects.push(defect);
        }
        Ok(defects)
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
        factor_or_shift(&mut matrix)?.solve(&mut update);
        let largest_state = pass
            .states
            .iter()
            .flat_map(|state| state.iter().zip(&scales))
            .map(|(value, scale)| value.abs() / scale)
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
                states: vec![start.clone()],
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
            if error > 1.0 && element.level < FINEST_LEVEL {
                element.level += if error > 256.0 { 2 } else { 1 };
                element.level = element.level.min(FINEST_LEVEL);
                continue;
            }
            if error == f64::INFINITY {
                return Err(self.no_step(element));
            }
            if self.pass.mesh.len() >= MOST_ELEMENTS {
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
        self.predict(element);
        self.solve(element)
    }

    /// Solve one element from the guess in `self.v`; false where Newton's method fails.
    fn solve(&mut self, element: Element) -> Result<bool, EngineError> {
        self.solver.reduction(element.level)?;
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

    /// Move the state to the end of the element just solved.
    fn advance(&mut self, element: Element) {
        let map = self.pass.map.take();
        match map {
            Some(mut map) => {
                self.advance_carrying(element, &mut map, None);
                self.pass.map = Some(map);
            }
            None => self.move_state(element),
        }
    }

    /// The same, with `map` carried along and the outputs' sensitivities written.
    fn advance_carrying(
        &mut self,
        element: Element,
        map: &mut Matrix<f64>,
        outputs: Option<&mut Matrix<f64>>,
    ) {
        let solver = &mut *self.solver;
        let reduction = &solver.reductions[&element.level];
        solver
            .stepper
            .carry_sensitivity(&solver.bank, reduction, map, outputs);
        self.move_state(element);
    }

    fn move_state(&mut self, element: Element) {
        let reduction = &self.solver.reductions[&element.level];
        self.solver
            .stepper
            .end_state(reduction, &self.state, &self.forcing, &mut self.end);
        std::mem::swap(&mut self.state, &mut self.end);
    }

    fn accept(&mut self, element: Element) {
        let ports = self.solver.bank.ports();
        let stages = self.solver.radau.stages();
        self.advance(element);
        self.pass.states.push(self.state.clone());
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
/// Most rounds of refinement.
const MOST_REFINEMENTS: usize = 14;
/// Finest element: the period over 2 to this power.
const FINEST_LEVEL: u32 = 36;
/// What changes when one element alone is bisected, and how it passes changes on.
struct Defect {
    /// Change of the end state.
    state: Vec<f64>,
    /// Change of the element's share of (cos, sin) of harmonics 1…20.
    harmonics: Vec<f64>,
    /// ∂(end state)/∂(start state).
    map: Matrix<f64>,
    /// ∂(share of the first harmonics)/∂(start state).
    output_map: Matrix<f64>,
}

impl Defect {
    fn new(size: usize) -> Self {
        Defect {
            state: vec![0.0; size],
            harmonics: vec![0.0; 2 * WATCHED_HARMONICS],
            map: Matrix::identity(size),
            output_map: Matrix::zero(2 * WEIGHED_HARMONICS, size),
        }
    }

    /// Add an output at `node` of `element`, and its sensitivity where it is to be kept.
    fn add_output(
        &mut self,
        element: &Element,
        node: f64,
        weight: f64,
        y: f64,
        dy: Option<&[f64]>,
    ) {
        let angle = std::f64::consts::TAU * element.phase(node);
        let share = 2.0 * weight * element.length() as f64 / (1u64 << FINEST) as f64;
        let (sine, cosine) = angle.sin_cos();
        let (mut c, mut s) = (cosine, sine);
        for n in 0..WATCHED_HARMONICS {
            for (row, wave) in [(2 * n, c), (2 * n + 1, s)] {
                self.harmonics[row] += share * wave * y;
                if let Some(dy) = dy.filter(|_| n < WEIGHED_HARMONICS) {
                    for (into, dy) in self.output_map.row_mut(row).iter_mut().zip(dy) {
                        *into += share * wave * dy;
                    }
                }
            }
            (c, s) = (c * cosine - s * sine, s * cosine + c * sine);
        }
    }
}

/// The effect above which elements are bisected, so that those left alone add up to no more than `allowed`.
fn refinement_limit(effects: &[f64], allowed: f64) -> f64 {
    let mut sorted = effects.to_vec();
    sorted.sort_by(f64::total_cmp);
    let mut sum = 0.0;
    for effect in &sorted {
        sum += effect;
        if sum > allowed {
            return 0.999 * effect;
        }
    }
    // nothing sticks out and yet bisection changed too much: take the upper quarter
    sorted.get(sorted.len() * 3 / 4).copied().unwrap_or(0.0)
}

/// Factor a matrix I − Φ. A floating charge keeps what it started with and makes it singular: a shift far below any
/// real loss leaves its direction alone.
fn factor_or_shift(matrix: &mut Matrix<f64>) -> Result<Factored<f64>, EngineError> {
    Factored::of(matrix)
        .or_else(|_| {
            for k in 0..matrix.rows() {
                matrix[(k, k)] += 1e-12;
            }
            Factored::of(matrix)
        })
        .map_err(|_| EngineError::Undetermined)
}

/// Harmonics whose sensitivity to the state weighs the elements for refinement.
const WEIGHED_HARMONICS: usize = 3;
/// Share of the tolerance that elements left alone may add up to.
const REFINEMENT_SHARE: f64 = 0.3;
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
