//! Audio through an engine: a stage applied to streams of samples, and what went in and came out.
//!
//! ```text
//! samples × full scale = EMF, V ─ up ─ engine, one step a high-rate sample ─ down ─ deviation from bias, V
//! ```
//!
//! The EMF is zero outside the sound. The engine starts from the bias one filter half-length before the sound and
//! runs as far past its end, so as many samples come out as go in, each at its own time. Channels share nothing but
//! the stage.

mod channel;
mod error;
mod levels;
mod report;
mod stepper;

use rayon::prelude::*;

use crate::audio::oversample::{MAX_FACTOR, Oversampling};
use crate::engine::transient::StepRule;
use crate::engine::{Linearised, OperatingPoint};
use crate::network::Network;
use crate::stage::Stage;

pub use channel::Channel;
pub use error::RenderError;
pub use levels::{SoundLevels, SoundMeter};
pub use report::{RenderReport, Side};

/// The least internal rate without a stated factor, Hz.
pub const LEAST_RATE: f64 = 384e3;

/// The least product of twos and threes that lifts `rate` in Hz to [`LEAST_RATE`]; other primes need one long filter.
pub fn default_factor(rate: f64) -> usize {
    (1..=MAX_FACTOR)
        .filter(|&factor| is_smooth(factor))
        .find(|&factor| factor as f64 * rate >= LEAST_RATE)
        .unwrap_or(MAX_FACTOR)
}

fn is_smooth(mut number: usize) -> bool {
    for prime in [2, 3] {
        while number.is_multiple_of(prime) {
            number /= prime;
        }
    }
    number == 1
}

/// A stage at its bias, ready to take sound.
#[derive(Clone, Debug)]
pub struct SoundStage {
    network: Network,
    point: OperatingPoint,
}

impl SoundStage {
    /// `stage` at its bias.
    ///
    /// # Errors
    /// Where there is no single stable bias.
    pub fn new(stage: &Stage) -> Result<Self, RenderError> {
        let network = Network::of(stage);
        let point = OperatingPoint::of(&network)?;
        Ok(SoundStage { network, point })
    }

    /// Output over EMF at `frequency` in Hz, a magnitude, for small signals; `None` where there is none.
    pub fn gain(&self, frequency: f64) -> Option<f64> {
        let gain = Linearised::at(&self.network, &self.point).gain(frequency);
        gain.map(|gain| gain.norm())
    }

    /// A renderer of `channels` channels at `rate` Hz, stepped at `factor` times that rate.
    ///
    /// # Errors
    /// Where the factor is out of range or the network singular at this step.
    pub fn renderer(
        &self,
        channels: usize,
        rate: f64,
        factor: usize,
    ) -> Result<Renderer, RenderError> {
        let oversampling = Oversampling::new(factor)?;
        let channel = Channel::new(&self.network, &self.point, rate, &oversampling)?;
        Ok(Renderer {
            rule: channel.rule(),
            channels: vec![channel; channels],
            outputs: vec![Vec::new(); channels],
        })
    }
}

/// All channels of one sound, each with its own state.
#[derive(Clone, Debug)]
pub struct Renderer {
    channels: Vec<Channel>,
    outputs: Vec<Vec<f64>>,
    rule: StepRule,
}

impl Renderer {
    /// The rule the stage is stepped by.
    pub fn rule(&self) -> StepRule {
        self.rule
    }

    /// Take the next samples of the EMF in V, a slice a channel; the outputs they settle, deviations from bias in V.
    ///
    /// # Errors
    /// Where a step cannot be solved.
    pub fn push<S: AsRef<[f64]> + Sync>(&mut self, emf: &[S]) -> Result<&[Vec<f64>], RenderError> {
        self.channels
            .par_iter_mut()
            .zip(&mut self.outputs)
            .zip(emf)
            .try_for_each(|((channel, output), emf)| {
                output.clear();
                channel.push(emf.as_ref(), output)
            })?;
        Ok(&self.outputs)
    }

    /// End the sound: the outputs that are left.
    ///
    /// # Errors
    /// Where a step cannot be solved.
    pub fn finish(&mut self) -> Result<&[Vec<f64>], RenderError> {
        self.channels
            .par_iter_mut()
            .zip(&mut self.outputs)
            .try_for_each(|(channel, output)| {
                output.clear();
                channel.finish(output)
            })?;
        Ok(&self.outputs)
    }
}

#[cfg(test)]
mod tests;
