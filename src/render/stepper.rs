//! The engine, one step a sample of the high-rate stream.
//!
//! Backward differences need the EMF at the end of a step, which is a sample of the stream. Radau IIA of two stages also
//! needs it at a third of the step. There the polynomial of fifth degree through the six samples around it is read
//! (Lagrange; error `ω⁶·h⁶·|Π(1/3 − k)|/6!` with k = −2…3, `4.3e-3·(ωh)⁶` of the component at ω: at 384 kHz −105 dB for
//! 20 kHz, −141 dB for 10 kHz), which needs two samples beyond the step: the engine then works two samples behind.

use crate::engine::transient::{StepRule, step_rule};
use crate::engine::{EngineError, OperatingPoint, RadauTransient, UniformTransient};
use crate::network::Network;

/// Samples around a step that the polynomial reads: two before its start, its start, its end, two after.
const AROUND: usize = 6;
/// Samples after the step among them.
const AHEAD: usize = 2;
/// Stages of the collocation rule.
const STAGES: usize = 2;

/// Steps a network through a stream of EMF samples, as many outputs as inputs.
#[derive(Clone, Debug)]
pub(super) enum Stepper {
    /// Third-order backward differences.
    Uniform(Box<UniformTransient<f64>>),
    /// Two-stage Radau IIA.
    Radau(Box<RadauStepper>),
}

impl Stepper {
    /// By the rule that suits the poles of `network` at `point`, with steps of `step` seconds.
    pub(super) fn new(
        network: &Network,
        point: &OperatingPoint,
        step: f64,
    ) -> Result<Self, EngineError> {
        Stepper::by_rule(step_rule(network, point, step), network, point, step)
    }

    pub(super) fn by_rule(
        rule: StepRule,
        network: &Network,
        point: &OperatingPoint,
        step: f64,
    ) -> Result<Self, EngineError> {
        Ok(match rule {
            StepRule::BackwardDifference => {
                Stepper::Uniform(Box::new(UniformTransient::new(network, point, step)?))
            }
            StepRule::Radau => Stepper::Radau(Box::new(RadauStepper::new(network, point, step)?)),
        })
    }

    pub(super) fn rule(&self) -> StepRule {
        match self {
            Stepper::Uniform(_) => StepRule::BackwardDifference,
            Stepper::Radau(_) => StepRule::Radau,
        }
    }

    /// Take samples of the EMF, V; append the outputs they settle, V.
    pub(super) fn push(&mut self, emf: &[f64], out: &mut Vec<f64>) -> Result<(), EngineError> {
        match self {
            Stepper::Uniform(engine) => {
                let before = out.len();
                out.resize(before + emf.len(), 0.0);
                engine.advance_block(emf, &mut out[before..])
            }
            Stepper::Radau(stepper) => emf.iter().try_for_each(|&value| stepper.take(value, out)),
        }
    }

    /// The outputs that are left; after the stream the EMF is zero.
    pub(super) fn finish(&mut self, out: &mut Vec<f64>) -> Result<(), EngineError> {
        match self {
            Stepper::Uniform(_) => Ok(()),
            Stepper::Radau(stepper) => (0..AHEAD).try_for_each(|_| stepper.take(0.0, out)),
        }
    }
}

/// Two-stage Radau IIA with the EMF at its inner stage read between the samples.
#[derive(Clone, Debug)]
pub(super) struct RadauStepper {
    engine: RadauTransient,
    /// Weights of the samples around a step at its inner stage, oldest first.
    weights: [f64; AROUND],
    /// The last samples, oldest first.
    around: [f64; AROUND],
    received: u64,
}

impl RadauStepper {
    fn new(network: &Network, point: &OperatingPoint, step: f64) -> Result<Self, EngineError> {
        let engine = RadauTransient::new(network, point, step, STAGES)?;
        let inner = engine.nodes().first().copied().unwrap_or(1.0);
        Ok(RadauStepper {
            engine,
            weights: weights_at(inner),
            around: [0.0; AROUND],
            received: 0,
        })
    }

    fn take(&mut self, emf: f64, out: &mut Vec<f64>) -> Result<(), EngineError> {
        self.around.rotate_left(1);
        self.around[AROUND - 1] = emf;
        self.received += 1;
        if self.received <= AHEAD as u64 {
            return Ok(());
        }
        let inner = self.weights.iter().zip(&self.around).map(|(w, e)| w * e);
        let drive = [inner.sum(), self.around[AROUND - 1 - AHEAD]];
        out.push(self.engine.advance(&drive)?);
        Ok(())
    }
}

/// Lagrange weights at `position` of the points −2, −1, 0, 1, 2, 3; the step runs from 0 to 1.
fn weights_at(position: f64) -> [f64; AROUND] {
    let place = |k: usize| k as f64 - 2.0;
    std::array::from_fn(|j| {
        (0..AROUND)
            .filter(|&k| k != j)
            .map(|k| (position - place(k)) / (place(j) - place(k)))
            .product()
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_polynomial_of_fifth_degree_is_read_exactly() {
        let polynomial = |x: f64| 1.0 + x * (2.0 - x * (0.5 + x * (0.1 - x * (0.03 + 0.01 * x))));
        let read: f64 = weights_at(1.0 / 3.0)
            .iter()
            .enumerate()
            .map(|(k, weight)| weight * polynomial(k as f64 - 2.0))
            .sum();
        // Six products of order one.
        assert!((read - polynomial(1.0 / 3.0)).abs() < 1e-14, "{read}");
    }

    #[test]
    fn the_stated_error_of_the_reading_between_samples_holds() {
        // 20 kHz at 384 kHz, worst phase.
        let angle = std::f64::consts::TAU * 20.0 / 384.0;
        let worst = (0..64)
            .map(|phase| {
                let at = |x: f64| (angle * x + phase as f64 * 0.1).sin();
                let read: f64 = weights_at(1.0 / 3.0)
                    .iter()
                    .enumerate()
                    .map(|(k, weight)| weight * at(k as f64 - 2.0))
                    .sum();
                (read - at(1.0 / 3.0)).abs()
            })
            .fold(0.0, f64::max);
        let decibels = 20.0 * worst.log10();
        assert!((-107.0..-104.0).contains(&decibels), "{decibels} dB");
    }
}
