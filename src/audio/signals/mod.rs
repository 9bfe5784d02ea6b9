//! Signals made here: a sine, a tone stepped upward in level, a plucked phrase.

mod pluck;
mod stepped;

pub use pluck::plucked_phrase;
pub use stepped::SteppedTone;

use super::AudioError;
use super::levels::LevelMeter;
use std::f64::consts::TAU;

/// The level of a generated signal, in dBFS.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Level {
    /// Of the largest sample.
    PeakDbfs(f64),
    /// Of the rms, relative to a full-scale sine (AES17).
    RmsDbfs(f64),
}

impl Level {
    /// Scales `samples` to this level; silence stays silence.
    pub fn apply(self, samples: &mut [f64]) {
        let meter = LevelMeter::of(samples);
        let (wanted, found) = match self {
            Self::PeakDbfs(level) => (level, meter.peak_dbfs()),
            Self::RmsDbfs(level) => (level, meter.rms_dbfs()),
        };
        if let Some(found) = found {
            let gain = amplitude(wanted - found);
            samples.iter_mut().for_each(|x| *x *= gain);
        }
    }
}

/// `frames` samples of a sine of `frequency` hertz, rising from zero; its peak and its rms are
/// both `level_dbfs`. The frequency must lie below half the `rate`, both in hertz.
pub fn sine(
    rate: u32,
    frequency: f64,
    level_dbfs: f64,
    frames: usize,
) -> Result<Vec<f64>, AudioError> {
    check_frequency(frequency, rate)?;
    check_level(level_dbfs)?;
    let peak = amplitude(level_dbfs);
    Ok((0..frames)
        .map(|i| peak * sine_at(i, frequency, rate))
        .collect())
}

/// Unit sine at sample `i`; whole periods are taken off first, so that sample one million is as
/// exact as the first.
fn sine_at(i: usize, frequency: f64, rate: u32) -> f64 {
    (TAU * (i as f64 * frequency / f64::from(rate)).fract()).sin()
}

/// Magnitude of a level in dBFS, full scale 1.
fn amplitude(level_dbfs: f64) -> f64 {
    10.0_f64.powf(level_dbfs / 20.0)
}

fn check_frequency(frequency: f64, rate: u32) -> Result<(), AudioError> {
    let half = f64::from(rate) / 2.0;
    if frequency > 0.0 && frequency < half {
        return Ok(());
    }
    let allowed = format!("above 0 Hz and below half the sampling rate, {half} Hz");
    Err(AudioError::Range {
        what: "frequency",
        found: frequency,
        allowed,
    })
}

fn check_level(level_dbfs: f64) -> Result<(), AudioError> {
    if level_dbfs.is_finite() && level_dbfs <= 0.0 {
        return Ok(());
    }
    Err(AudioError::Range {
        what: "level",
        found: level_dbfs,
        allowed: "0 dBFS or below".to_owned(),
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_sine_has_the_stated_peak_and_rms() {
        let meter = LevelMeter::of(&sine(48_000, 1000.0, -20.0, 48_000).unwrap());
        // Rounding of 48000 squares.
        assert!((meter.peak_dbfs().unwrap() + 20.0).abs() < 1e-11);
        assert!((meter.rms_dbfs().unwrap() + 20.0).abs() < 1e-11);
    }

    #[test]
    fn sines_beyond_half_the_rate_or_full_scale_are_refused() {
        for frequency in [0.0, -1.0, 24_000.0, f64::NAN] {
            let message = sine(48_000, frequency, -6.0, 1).unwrap_err().to_string();
            assert!(message.contains("24000 Hz"), "{message}");
        }
        for level in [0.1, f64::NAN, f64::INFINITY] {
            assert!(sine(48_000, 1000.0, level, 1).is_err());
        }
    }

    #[test]
    fn levels_are_applied_exactly_and_silence_stays() {
        let mut samples = vec![0.1, -0.3, 0.2];
        Level::RmsDbfs(-12.0).apply(&mut samples);
        assert!((LevelMeter::of(&samples).rms_dbfs().unwrap() + 12.0).abs() < 1e-12);
        Level::PeakDbfs(-1.0).apply(&mut samples);
        assert!((LevelMeter::of(&samples).peak_dbfs().unwrap() + 1.0).abs() < 1e-12);
        let mut silence = vec![0.0; 3];
        Level::PeakDbfs(0.0).apply(&mut silence);
        assert_eq!(silence, [0.0; 3]);
    }
}
