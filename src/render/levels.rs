//! What a sound measures: peak, true peak, rms, loudness, offset.

use crate::audio::AudioError;
use crate::audio::levels::{LevelMeter, LoudnessMeter, TruePeakMeter};

/// Levels of a sound over all its channels, full scale 1.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct SoundLevels {
    /// Largest sample.
    pub peak: f64,
    /// Largest value between the samples too (BS.1770).
    pub true_peak: f64,
    /// Root mean square in dBFS (AES17: a full-scale sine is 0); `None` for silence.
    pub rms_dbfs: Option<f64>,
    /// Programme loudness, LUFS; `None` for silence or less than 0.4 s.
    pub loudness_lufs: Option<f64>,
    /// Mean of the channel where it is largest, with its sign.
    pub offset: f64,
}

/// Measures a sound as it passes.
pub struct SoundMeter {
    levels: Vec<LevelMeter>,
    true_peaks: Vec<TruePeakMeter>,
    loudness: LoudnessMeter,
    sums: Vec<f64>,
    frames: u64,
}

impl SoundMeter {
    /// For `channels` channels at `rate` Hz.
    ///
    /// # Errors
    /// Where loudness is not defined for so many channels.
    pub fn new(channels: usize, rate: u32) -> Result<Self, AudioError> {
        Ok(SoundMeter {
            levels: vec![LevelMeter::default(); channels],
            true_peaks: vec![TruePeakMeter::new()?; channels],
            loudness: LoudnessMeter::new(channels, rate)?,
            sums: vec![0.0; channels],
            frames: 0,
        })
    }

    /// Take the next samples, a slice a channel.
    ///
    /// # Errors
    /// Where the channels differ in length.
    pub fn push<S: AsRef<[f64]>>(&mut self, channels: &[S]) -> Result<(), AudioError> {
        for (channel, samples) in channels.iter().enumerate() {
            let samples = samples.as_ref();
            self.levels[channel].push(samples);
            self.true_peaks[channel].push(samples);
            self.sums[channel] += samples.iter().sum::<f64>();
        }
        self.frames += channels.first().map_or(0, |first| first.as_ref().len()) as u64;
        let slices: Vec<&[f64]> = channels.iter().map(AsRef::as_ref).collect();
        self.loudness.push(&slices)
    }

    /// End the sound.
    pub fn finish(mut self) -> SoundLevels {
        let mut together = LevelMeter::default();
        self.levels.iter().for_each(|one| together.merge(one));
        let frames = self.frames.max(1) as f64;
        let means = self.sums.iter().map(|sum| sum / frames);
        let true_peaks = self.true_peaks.iter_mut().map(TruePeakMeter::finish);
        SoundLevels {
            peak: together.peak(),
            true_peak: true_peaks.fold(0.0, f64::max),
            rms_dbfs: together.rms_dbfs(),
            loudness_lufs: self.loudness.lufs(),
            offset: means.fold(0.0, |worst: f64, mean| {
                if mean.abs() > worst.abs() {
                    mean
                } else {
                    worst
                }
            }),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_louder_channel_gives_the_peak_and_the_larger_offset() {
        let mut meter = SoundMeter::new(2, 48_000).unwrap();
        meter
            .push(&[vec![0.5, -0.25, 0.0, 0.0], vec![-0.125; 4]])
            .unwrap();
        let levels = meter.finish();
        assert_eq!((levels.peak, levels.offset), (0.5, -0.125));
        assert!(levels.true_peak >= 0.5);
        assert_eq!(levels.loudness_lufs, None);
    }

    #[test]
    fn silence_has_no_decibels() {
        let mut meter = SoundMeter::new(1, 48_000).unwrap();
        meter.push(&[vec![0.0; 48_000]]).unwrap();
        let levels = meter.finish();
        assert_eq!((levels.rms_dbfs, levels.loudness_lufs), (None, None));
        assert_eq!(levels.true_peak, 0.0);
    }
}
