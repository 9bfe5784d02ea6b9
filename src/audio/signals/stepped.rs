//! A tone that rises in equal steps of level, to find by ear and by meter where a stage gives out.
//!
//! One uninterrupted sine; every step is a whole number of its periods long and so begins where
//! the sine rises through zero. There the envelope glides to the new level along half a period of
//! a cosine, which has no corner: no click. The tone begins from silence and ends in it the same way.

use std::f64::consts::PI;

use super::{AudioError, amplitude, check_frequency, check_level, sine_at};

/// Seconds of a glide between two levels.
const GLIDE: f64 = 0.005;
/// More steps than any tone needs; beyond it the step is mistyped.
const MAX_STEPS: f64 = 1000.0;

/// The make-up of a stepped tone.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct SteppedTone {
    /// Sampling rate in hertz.
    pub rate: u32,
    /// Frequency in hertz, below half the rate.
    pub frequency: f64,
    /// Peak level of the first step in dBFS.
    pub from_dbfs: f64,
    /// Peak level of the last step in dBFS, at most 0.
    pub to_dbfs: f64,
    /// Rise from step to step in dB.
    pub step_db: f64,
    /// Length of a step in seconds, rounded to whole periods.
    pub seconds: f64,
}

impl Default for SteppedTone {
    /// 1 kHz at 48 kHz from −60 to 0 dBFS in 3 dB steps of 0.25 s: 21 steps, 5.25 s.
    fn default() -> Self {
        Self {
            rate: 48_000,
            frequency: 1000.0,
            from_dbfs: -60.0,
            to_dbfs: 0.0,
            step_db: 3.0,
            seconds: 0.25,
        }
    }
}

impl SteppedTone {
    /// Peak levels of the steps in dBFS; the last is at most `to_dbfs`.
    pub fn levels_dbfs(&self) -> Vec<f64> {
        // A millionth of a step forgives decimals that binary numbers cannot hold.
        let rises = ((self.to_dbfs - self.from_dbfs) / self.step_db + 1e-6).floor();
        (0..=rises as usize)
            .map(|i| self.from_dbfs + i as f64 * self.step_db)
            .collect()
    }

    /// First sample of step `i`; that of one step more than there are is the end.
    pub fn start(&self, i: usize) -> usize {
        let periods = (self.seconds * self.frequency).round().max(1.0);
        (i as f64 * periods / self.frequency * f64::from(self.rate)).round() as usize
    }

    /// The samples, full scale ±1.
    pub fn samples(&self) -> Result<Vec<f64>, AudioError> {
        self.check()?;
        let levels = self.levels_dbfs();
        let end = self.start(levels.len());
        let mut before = 0.0;
        let mut samples = Vec::with_capacity(end);
        for (i, level) in levels.iter().enumerate() {
            let (start, next, peak) = (self.start(i), self.start(i + 1), amplitude(*level));
            for k in start..next {
                let rise = self.glide(k - start);
                let fall = self.glide(end - k);
                let envelope = fall * (before + (peak - before) * rise);
                samples.push(envelope * sine_at(k, self.frequency, self.rate));
            }
            before = peak;
        }
        Ok(samples)
    }

    /// 0 to 1 over the glide, `k` samples after its beginning.
    fn glide(&self, k: usize) -> f64 {
        let share = k as f64 / (GLIDE * f64::from(self.rate));
        if share >= 1.0 {
            1.0
        } else {
            0.5 - 0.5 * (PI * share).cos()
        }
    }

    fn check(&self) -> Result<(), AudioError> {
        check_frequency(self.frequency, self.rate)?;
        check_level(self.from_dbfs)?;
        check_level(self.to_dbfs)?;
        let range = |what, found, allowed: &str| {
            Err(AudioError::Range {
                what,
                found,
                allowed: allowed.to_owned(),
            })
        };
        let rises = (self.to_dbfs - self.from_dbfs) / self.step_db;
        if !(self.step_db > 0.0 && (0.0..=MAX_STEPS).contains(&rises)) {
            return range(
                "step of level",
                self.step_db,
                "above 0 dB, with at most 1000 steps upward from the first level",
            );
        }
        if !(2.0 * GLIDE..=60.0).contains(&self.seconds) {
            return range("length of a step", self.seconds, "0.01 to 60 s");
        }
        Ok(())
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::audio::levels::LevelMeter;

    #[test]
    fn every_step_has_its_level() {
        let tone = SteppedTone::default();
        let samples = tone.samples().unwrap();
        let levels = tone.levels_dbfs();
        assert_eq!((levels.len(), samples.len()), (21, 252_000));
        for (i, level) in levels.iter().enumerate() {
            // The middle, past the glide and before the fade of the last step: 200 periods.
            let start = tone.start(i) + 960;
            let meter = LevelMeter::of(&samples[start..start + 9600]);
            assert!(
                (meter.peak_dbfs().unwrap() - level).abs() < 1e-11,
                "step {i}"
            );
            assert!(
                (meter.rms_dbfs().unwrap() - level).abs() < 1e-11,
                "step {i}"
            );
        }
    }

    #[test]
    fn steps_do_not_click() {
        let tone = SteppedTone {
            from_dbfs: -9.0,
            ..SteppedTone::default()
        };
        let samples = tone.samples().unwrap();
        // The second-order notch 1 − 2cos(ω)z⁻¹ + z⁻² removes the tone; what a glide leaves is
        // bounded by its slope: (ΔA)·(π/2)/240 a sample, times 2·sin(ω) = 0.26, ΔA ≤ 0.71 at the
        // end: 1.2e-3. A hard step at a zero crossing would leave ΔA·sin(ω) = 0.09.
        let c = 2.0 * (2.0 * PI / 48.0).cos();
        let worst = samples
            .windows(3)
            .map(|x| (x[2] - c * x[1] + x[0]).abs())
            .fold(0.0, f64::max);
        assert!(worst < 2.0e-3, "{worst}");
        let hard: Vec<f64> = (0..48)
            .map(|k| sine_at(k, 1000.0, 48_000) * if k < 24 { 0.3 } else { 1.0 })
            .collect();
        let click = hard
            .windows(3)
            .map(|x| (x[2] - c * x[1] + x[0]).abs())
            .fold(0.0, f64::max);
        assert!(
            click > 20.0 * worst,
            "the measure must see a hard step: {click}"
        );
    }

    #[test]
    fn steps_begin_where_the_sine_rises_through_zero() {
        let tone = SteppedTone {
            frequency: 997.0,
            seconds: 0.1,
            ..SteppedTone::default()
        };
        for i in 0..21 {
            // Within half a sample of the crossing.
            assert!(
                sine_at(tone.start(i), 997.0, 48_000).abs()
                    <= (PI * 997.0 / 48_000.0).sin() + 1e-12
            );
        }
    }

    #[test]
    fn impossible_tones_are_refused() {
        let tone = SteppedTone::default();
        for wrong in [
            SteppedTone {
                frequency: 24_000.0,
                ..tone
            },
            SteppedTone {
                to_dbfs: 3.0,
                ..tone
            },
            SteppedTone {
                from_dbfs: f64::NAN,
                ..tone
            },
            SteppedTone {
                step_db: 0.0,
                ..tone
            },
            SteppedTone {
                step_db: -3.0,
                ..tone
            },
            SteppedTone {
                step_db: 1e-9,
                ..tone
            },
            SteppedTone {
                from_dbfs: 0.0,
                to_dbfs: -6.0,
                ..tone
            },
            SteppedTone {
                seconds: 0.0,
                ..tone
            },
            SteppedTone {
                seconds: f64::INFINITY,
                ..tone
            },
        ] {
            assert!(
                matches!(wrong.samples(), Err(AudioError::Range { .. })),
                "{wrong:?}"
            );
        }
    }
}
