//! Change of the sampling rate by a whole factor, up before an engine and down after it.
//!
//! ```text
//! up:  y[j] = Σₖ x[k]·h(j − k·m)          down:  y[i] = 1/m · Σⱼ u[j]·h(j − i·m)
//! ```
//!
//! with one symmetric low-pass h of gain m for both, run as a cascade of such stages, the cheap
//! short ones at the high rates (R. E. Crochiere, L. R. Rabiner, "Multirate Digital Signal
//! Processing", 1983, chapter 5). The response of a whole cascade, each way, in terms of the base
//! rate: within ±0.00002 dB up to [`PASSBAND`], below −120 dB from [`STOPBAND`] upward. Delay is
//! removed: a sample at time t comes out at time t.
//!
//! Outside the sound the signal is zero, and a linear-phase filter begins to move before the
//! sound does. The stream at the high rate therefore starts [`Oversampling::lead`] base samples
//! before the first sample and runs as many past the last:
//!
//! ```text
//! N samples ─ Interpolator ─▶ (N + 2·lead)·factor samples ─ engine ─▶ Decimator ─▶ N samples
//!                             sample k is at time (k − lead·factor)/(rate·factor)
//! ```
//!
//! Results do not depend on how the streams are cut into blocks, to the last bit.

mod decimate;
mod design;
mod interpolate;
mod kernel;

use std::sync::Arc;

use super::AudioError;
pub use decimate::Decimator;
use design::StageDesign;
pub use interpolate::Interpolator;

/// Upper edge of the pass band, as a share of the base sampling rate (20 kHz at 48 kHz).
pub const PASSBAND: f64 = 0.417;
/// Lower edge of the stop band, as a share of the base sampling rate.
pub const STOPBAND: f64 = 0.5;
/// The largest factor.
pub const MAX_FACTOR: usize = 128;

/// The filters of one factor: designed once, shared by any number of channels.
#[derive(Clone, Debug)]
pub struct Oversampling {
    factor: usize,
    stages: Arc<[StageDesign]>,
}

impl Oversampling {
    /// Filters for `factor`, 1 (samples pass untouched) to [`MAX_FACTOR`].
    ///
    /// A prime factor needs one long stage: powers of two are by far the cheapest.
    pub fn new(factor: usize) -> Result<Self, AudioError> {
        if !(1..=MAX_FACTOR).contains(&factor) {
            return Err(AudioError::Range {
                what: "oversampling factor",
                found: factor as f64,
                allowed: format!("a whole number from 1 to {MAX_FACTOR}"),
            });
        }
        Ok(Self {
            factor,
            stages: design::plan(factor).into(),
        })
    }

    /// The factor between the high rate and the base rate.
    pub fn factor(&self) -> usize {
        self.factor
    }

    /// How many base samples the high-rate stream starts before the sound, and runs past it.
    pub fn lead(&self) -> usize {
        self.half_length().div_ceil(self.factor)
    }

    /// Time in seconds of sample `k` of the high-rate stream, 0 being the first sample of the
    /// sound; `rate` is the base rate in hertz.
    pub fn time(&self, k: u64, rate: f64) -> f64 {
        (k as f64 - (self.lead() * self.factor) as f64) / (rate * self.factor as f64)
    }

    /// Samples of the high-rate stream that belongs to `frames` base samples.
    pub fn stream_length(&self, frames: u64) -> u64 {
        (frames + 2 * self.lead() as u64) * self.factor as u64
    }

    /// A fresh interpolator for one channel.
    pub fn interpolator(&self) -> Interpolator {
        Interpolator::from_design(self)
    }

    /// A fresh decimator for one channel.
    pub fn decimator(&self) -> Decimator {
        Decimator::from_design(self)
    }

    /// Half length of the whole cascade in samples at the high rate.
    fn half_length(&self) -> usize {
        self.stages
            .iter()
            .fold(0, |length, stage| (length + stage.half) * stage.factor)
    }

    /// Samples between the start of the high-rate stream and the reach of the cascade.
    fn pad(&self) -> usize {
        self.lead() * self.factor - self.half_length()
    }

    /// Gain of the cascade at `frequency`, a share of the base sampling rate; real, because the
    /// delay is removed, and 1 in the pass band.
    pub fn response(&self, frequency: f64) -> f64 {
        let mut rate = 1.0;
        let mut gain = 1.0;
        for stage in self.stages.iter() {
            rate *= stage.factor as f64;
            gain *= stage.response(frequency / rate);
        }
        gain
    }
}

#[cfg(test)]
mod tests;
