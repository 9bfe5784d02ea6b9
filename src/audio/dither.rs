//! Dither, and rounding to whole steps.
//!
//! The sum of two independent uniform numbers of ±½ step has a triangular density of ±1 step; it
//! makes mean and power of the rounding error independent of the signal (S. P. Lipshitz,
//! R. A. Wannamaker, J. Vanderkooy, "Quantization and Dither: A Theoretical Survey", J. Audio
//! Eng. Soc. 40, 1992). Total noise is then step²/4: step²/6 of dither, step²/12 of rounding.

use std::str::FromStr;

use super::AudioError;
use super::random::Random;

/// Noise added before rounding to an integer format.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub enum Dither {
    /// Plain rounding: the error follows the signal.
    None,
    /// Triangular density of ±1 step, independent for each channel.
    #[default]
    Tpdf,
}

impl FromStr for Dither {
    type Err = AudioError;

    fn from_str(word: &str) -> Result<Self, AudioError> {
        match word {
            "none" => Ok(Self::None),
            "tpdf" => Ok(Self::Tpdf),
            _ => Err(AudioError::Word {
                what: "dither",
                found: word.to_owned(),
                allowed: "none or tpdf",
            }),
        }
    }
}

/// Rounds one channel of ±1 full scale to signed integers of a given width.
#[derive(Clone, Debug)]
pub struct Quantizer {
    dither: Dither,
    random: Random,
    /// Steps from zero to full scale, 2^(bits − 1).
    steps: f64,
    clipped: u64,
}

impl Quantizer {
    /// For `bits` from 2 to 32; the same `seed` and `channel` give the same noise.
    pub fn new(bits: u32, dither: Dither, seed: u64, channel: u64) -> Self {
        Self {
            dither,
            random: Random::stream(seed, channel),
            steps: (1_u64 << (bits - 1)) as f64,
            clipped: 0,
        }
    }

    /// The integer nearest to `sample` plus dither, ties to even, held inside the format.
    ///
    /// +1 has no code of its own: it becomes the largest, one step below.
    pub fn quantize(&mut self, sample: f64) -> i32 {
        if sample.abs() > 1.0 {
            self.clipped += 1;
        }
        let noise = match self.dither {
            Dither::None => 0.0,
            Dither::Tpdf => self.random.uniform() - self.random.uniform(),
        };
        let code = (sample * self.steps + noise).round_ties_even();
        code.clamp(-self.steps, self.steps - 1.0) as i32
    }

    /// Samples so far that were beyond full scale, and not merely rounded or dithered onto it.
    pub fn clipped(&self) -> u64 {
        self.clipped
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn plain_rounding_goes_to_the_nearest_and_saturates() {
        let mut quantizer = Quantizer::new(16, Dither::None, 0, 0);
        let step = 1.0 / 32768.0;
        let cases = [
            (0.0, 0),
            (0.49, 0),
            (0.5, 0),
            (0.51, 1),
            (1.5, 2),
            (2.5, 2),
            (-0.51, -1),
            (-1.5, -2),
            (32766.6, 32767),
            (32767.9, 32767),
            (32768.0, 32767),
            (-32768.0, -32768),
            (-32769.0, -32768),
            (1e9, 32767),
        ];
        for (steps, code) in cases {
            assert_eq!(quantizer.quantize(steps * step), code, "{steps} steps");
        }
        assert_eq!(quantizer.clipped(), 2);
    }

    #[test]
    fn thirty_two_bits_reach_both_ends() {
        let mut quantizer = Quantizer::new(32, Dither::None, 0, 0);
        assert_eq!(quantizer.quantize(-1.0), i32::MIN);
        assert_eq!(quantizer.quantize(1.0), i32::MAX);
        assert_eq!(quantizer.quantize(1.0 / 2_147_483_648.0), 1);
    }

    #[test]
    fn dithered_error_has_mean_zero_and_power_of_a_quarter_step_whatever_the_signal() {
        let count = 200_000;
        for level in [0.0, 0.25, 0.5, 100.37] {
            let mut quantizer = Quantizer::new(16, Dither::Tpdf, 1, 0);
            let errors = (0..count).map(|_| f64::from(quantizer.quantize(level / 32768.0)) - level);
            let (sum, square) = errors.fold((0.0, 0.0), |(s, q), e| (s + e, q + e * e));
            let (mean, power) = (sum / f64::from(count), square / f64::from(count));
            // Five standard errors: rms ½ over √count is 0.0011; the power's spread is about as wide.
            assert!(mean.abs() < 0.006, "{level}: mean {mean}");
            assert!((power - 0.25).abs() < 0.006, "{level}: power {power}");
        }
    }

    #[test]
    fn channels_are_dithered_independently_and_runs_repeat() {
        let run = |channel| {
            let mut quantizer = Quantizer::new(16, Dither::Tpdf, 7, channel);
            (0..4096)
                .map(|_| quantizer.quantize(0.0))
                .collect::<Vec<_>>()
        };
        assert_eq!(run(0), run(0));
        let product: i32 = run(0).iter().zip(run(1)).map(|(a, b)| a * b).sum();
        // Independent errors of power ¼: spread ¼·√4096 = 16, five of them.
        assert!(product.abs() < 80, "{product}");
    }
}
