//! The periodic steady state under a periodic drive.
//!
//! Shooting (T. J. Aprille and T. N. Trick, "Steady-state analysis of nonlinear circuits with periodic inputs",
//! Proc. IEEE 60, 1972) on all charges and fluxes, with sensitivities carried along, over Radau IIA collocation. The
//! mesh is dyadic (every element is the period over a power of two, aligned), chosen by a local error estimate while
//! the shooting settles, then frozen; the result is the solution with every element bisected once more, and the change
//! that brings is its own error estimate. A point's mesh never depends on its neighbours.

mod element;
mod refine;
mod shooting;
mod solution;
mod sweep;

pub use solution::PeriodicSolution;

use super::bank::PortBank;
use super::bias::OperatingPoint;
use super::error::EngineError;
use super::linear::{Linearised, Phasors};
use super::scheme::Radau;
use super::step::{State, StepSolver};
use crate::network::elements::EMF;
use crate::network::{Network, Reduction};
use element::Element;
use std::collections::HashMap;

/// Harmonics whose change under bisection is the error estimate.
pub const WATCHED_HARMONICS: usize = 20;

/// Most elements of one period.
const MOST_ELEMENTS: usize = 20_000;

/// Most rounds of refinement.
const MOST_REFINEMENTS: usize = 14;

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
            first_local_error: 5e-4,
        }
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
        Err(match last {
            EngineError::NoPeriod { reason, .. } => self.no_period(amplitude, &reason),
            other => other,
        })
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
