//! Level measurements of streamed sound, full scale ±1.
//!
//! Peak in dBFS is 20·log10 of the largest magnitude. Rms in dBFS is relative to the rms of a
//! full-scale sine (AES17), so a full-scale sine reads 0 dBFS both ways. True peak in dBTP is the
//! peak of the curve through the samples (ITU-R BS.1770, annex 2: at least fourfold
//! oversampling); loudness in LUFS is the gated programme loudness of the same recommendation.
//! Silence has no level: `None`.

use super::AudioError;
use super::oversample::Interpolator;

/// 20·log10 of a magnitude relative to full scale; `None` for zero.
pub fn dbfs(magnitude: f64) -> Option<f64> {
    (magnitude > 0.0).then(|| 20.0 * magnitude.log10())
}

/// Peak and rms of one channel.
#[derive(Clone, Debug, Default)]
pub struct LevelMeter {
    peak: f64,
    square_sum: f64,
    count: u64,
}

impl LevelMeter {
    /// The meter after all of `samples`.
    pub fn of(samples: &[f64]) -> Self {
        let mut meter = Self::default();
        meter.push(samples);
        meter
    }

    /// Takes the next samples.
    pub fn push(&mut self, samples: &[f64]) {
        for x in samples {
            self.peak = self.peak.max(x.abs());
            self.square_sum += x * x;
        }
        self.count += samples.len() as u64;
    }

    /// Adds what another meter, of another channel, has seen.
    pub fn merge(&mut self, other: &Self) {
        self.peak = self.peak.max(other.peak);
        self.square_sum += other.square_sum;
        self.count += other.count;
    }

    /// Largest magnitude, full scale 1.
    pub fn peak(&self) -> f64 {
        self.peak
    }

    /// Largest magnitude in dBFS.
    pub fn peak_dbfs(&self) -> Option<f64> {
        dbfs(self.peak)
    }

    /// Rms in dBFS, 0 for a full-scale sine.
    pub fn rms_dbfs(&self) -> Option<f64> {
        dbfs((2.0 * self.square_sum / self.count.max(1) as f64).sqrt())
    }
}

/// True peak of one channel, by the interpolator of this project at four times the rate.
///
/// Between the samples of the fourfold grid a component at 20 kHz of 48 kHz can still rise by
/// 20·log10(1/cos(π·20/192)) = 0.48 dB, one at 10 kHz by 0.12 dB.
#[derive(Clone, Debug)]
pub struct TruePeakMeter {
    interpolator: Interpolator,
    stream: Vec<f64>,
    peak: f64,
}

impl TruePeakMeter {
    /// A meter that has seen nothing.
    pub fn new() -> Result<Self, AudioError> {
        Ok(Self {
            interpolator: Interpolator::new(4)?,
            stream: Vec::new(),
            peak: 0.0,
        })
    }

    /// Takes the next samples.
    pub fn push(&mut self, samples: &[f64]) {
        self.stream.clear();
        self.interpolator.push(samples, &mut self.stream);
        // The samples themselves count too: the band-limited curve may pass a little below them.
        self.peak = samples
            .iter()
            .chain(&self.stream)
            .fold(self.peak, |peak, x| peak.max(x.abs()));
    }

    /// Ends the sound and returns its true peak, full scale 1; ready for another sound.
    pub fn finish(&mut self) -> f64 {
        self.stream.clear();
        self.interpolator.finish(&mut self.stream);
        let peak = self
            .stream
            .iter()
            .fold(self.peak, |peak, x| peak.max(x.abs()));
        self.peak = 0.0;
        peak
    }
}

/// Gated programme loudness of all channels together, ITU-R BS.1770.
pub struct LoudnessMeter {
    meter: ebur128::EbuR128,
}

impl LoudnessMeter {
    /// For 1 to 8 channels at `rate` hertz.
    pub fn new(channels: usize, rate: u32) -> Result<Self, AudioError> {
        let meter = ebur128::EbuR128::new(channels as u32, rate, ebur128::Mode::I);
        meter
            .map(|meter| Self { meter })
            .map_err(|_| AudioError::Shape {
                detail: format!("loudness of {channels} channels at {rate} Hz is not measured"),
            })
    }

    /// Takes the next samples, a slice a channel.
    pub fn push(&mut self, channels: &[&[f64]]) -> Result<(), AudioError> {
        let pushed = self.meter.add_frames_planar_f64(channels);
        pushed.map_err(|e| AudioError::Shape {
            detail: format!("loudness: {e}"),
        })
    }

    /// Loudness so far in LUFS; `None` for silence or less than 0.4 s, which no gate block fills.
    pub fn lufs(&self) -> Option<f64> {
        self.meter
            .loudness_global()
            .ok()
            .filter(|loudness| loudness.is_finite())
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use std::f64::consts::PI;

    fn sine(frequency: f64, phase: f64, amplitude: f64, count: usize) -> Vec<f64> {
        (0..count)
            .map(|i| amplitude * (2.0 * PI * frequency * i as f64 + phase).sin())
            .collect()
    }

    #[test]
    fn a_full_scale_sine_reads_zero_peak_and_zero_rms() {
        // Whole periods with samples on the crest: exact up to rounding of 48000 squares.
        let meter = LevelMeter::of(&sine(1.0 / 48.0, 0.0, 1.0, 48_000));
        assert!(meter.peak_dbfs().unwrap().abs() < 1e-12);
        assert!(meter.rms_dbfs().unwrap().abs() < 1e-11);
    }

    #[test]
    fn a_full_scale_square_reads_three_db_above_a_sine() {
        let meter = LevelMeter::of(&[1.0, -1.0]);
        assert!((meter.rms_dbfs().unwrap() - 10.0 * 2.0_f64.log10()).abs() < 1e-12);
    }

    #[test]
    fn silence_has_no_level() {
        let meter = LevelMeter::of(&[0.0; 10]);
        assert_eq!((meter.peak_dbfs(), meter.rms_dbfs()), (None, None));
        assert_eq!(LevelMeter::default().rms_dbfs(), None);
        let mut loudness = LoudnessMeter::new(1, 48_000).unwrap();
        loudness.push(&[&[0.0; 48_000]]).unwrap();
        assert_eq!(loudness.lufs(), None);
    }

    #[test]
    fn merged_channels_read_as_one() {
        let (left, right) = (sine(0.01, 0.0, 0.5, 500), sine(0.013, 1.0, 0.8, 500));
        let mut merged = LevelMeter::of(&left);
        merged.merge(&LevelMeter::of(&right));
        let together = LevelMeter::of(&[left, right].concat());
        assert_eq!(merged.peak(), together.peak());
        // Another order of addition.
        assert!((merged.rms_dbfs().unwrap() - together.rms_dbfs().unwrap()).abs() < 1e-12);
    }

    #[test]
    fn true_peak_finds_the_crest_between_samples() {
        // A quarter of the rate at 45°: samples at 0.7071, crests between. A slow fade keeps the
        // ends from adding overshoot of their own.
        let mut samples = sine(0.25, PI / 4.0, 1.0, 4000);
        for i in 0..1000 {
            let fade = 0.5 - 0.5 * (PI * i as f64 / 1000.0).cos();
            samples[i] *= fade;
            samples[3999 - i] *= fade;
        }
        assert!((LevelMeter::of(&samples).peak() - 0.5_f64.sqrt()).abs() < 1e-12);
        let mut meter = TruePeakMeter::new().unwrap();
        samples.chunks(77).for_each(|block| meter.push(block));
        // The fourfold grid meets these crests: what is left is the ripple of the filter.
        let peak = meter.finish();
        assert!((peak - 1.0).abs() < 2.3e-6, "{peak}");
        assert_eq!(meter.finish(), 0.0);
    }

    #[test]
    fn loudness_of_the_reference_sine_is_minus_3_01() {
        // ITU-R BS.1770: a 0 dBFS 997 Hz sine in one front channel reads −3.01 LKFS. At 48 kHz,
        // where the recommendation gives the filters, to its rounding; elsewhere to the ±0.1 LU
        // that EBU Tech 3341 allows a meter.
        for (rate, margin) in [(44_100_u32, 0.1), (48_000, 0.005), (96_000, 0.1)] {
            let mut meter = LoudnessMeter::new(1, rate).unwrap();
            let samples = sine(997.0 / f64::from(rate), 0.0, 1.0, 4 * rate as usize);
            samples
                .chunks(1000)
                .for_each(|block| meter.push(&[block]).unwrap());
            let found = meter.lufs().unwrap();
            assert!((found + 3.01).abs() < margin, "{rate} Hz: {found}");
        }
    }
}
