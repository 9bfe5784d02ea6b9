//! One channel: up, through the engine, down.

use super::RenderError;
use super::stepper::Stepper;
use crate::audio::oversample::{Decimator, Interpolator, Oversampling};
use crate::engine::OperatingPoint;
use crate::engine::transient::StepRule;
use crate::network::Network;

/// Base samples taken at once: the high-rate blocks then stay in the cache.
const BLOCK: usize = 256;

/// One channel of a sound, streamed in constant memory. Results do not depend on how the stream is cut.
#[derive(Clone, Debug)]
pub struct Channel {
    interpolator: Interpolator,
    stepper: Stepper,
    decimator: Decimator,
    high: Vec<f64>,
    stepped: Vec<f64>,
}

impl Channel {
    /// A channel through `network` from `point`, at `rate` Hz times the factor of `oversampling`.
    ///
    /// # Errors
    /// Where the network is singular at this step.
    pub fn new(
        network: &Network,
        point: &OperatingPoint,
        rate: f64,
        oversampling: &Oversampling,
    ) -> Result<Self, RenderError> {
        let step = 1.0 / (rate * oversampling.factor() as f64);
        Ok(Channel {
            interpolator: oversampling.interpolator(),
            stepper: Stepper::new(network, point, step)?,
            decimator: oversampling.decimator(),
            high: Vec::new(),
            stepped: Vec::new(),
        })
    }

    /// The rule the stage is stepped by.
    pub fn rule(&self) -> StepRule {
        self.stepper.rule()
    }

    /// Take the next samples of the EMF, V; append the outputs they settle, deviations from bias in V.
    ///
    /// # Errors
    /// Where a step cannot be solved.
    pub fn push(&mut self, emf: &[f64], out: &mut Vec<f64>) -> Result<(), RenderError> {
        for block in emf.chunks(BLOCK) {
            self.high.clear();
            self.interpolator.push(block, &mut self.high);
            self.step(out, false)?;
        }
        Ok(())
    }

    /// End the sound: append the outputs that are left, as many in all as samples went in.
    ///
    /// # Errors
    /// Where a step cannot be solved.
    pub fn finish(&mut self, out: &mut Vec<f64>) -> Result<(), RenderError> {
        self.high.clear();
        self.interpolator.finish(&mut self.high);
        self.step(out, true)
    }

    fn step(&mut self, out: &mut Vec<f64>, last: bool) -> Result<(), RenderError> {
        self.stepped.clear();
        self.stepper.push(&self.high, &mut self.stepped)?;
        if last {
            self.stepper.finish(&mut self.stepped)?;
        }
        self.decimator.push(&self.stepped, out);
        Ok(())
    }
}
