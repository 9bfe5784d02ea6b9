//! The phrase through the stage at every drive, all equally loud, so that the ear compares distortion and not level.

use std::path::Path;

use rayon::prelude::*;

use super::super::CommandError;
use super::super::interrupt::Guard;
use super::STAGE;
use super::drives::Drive;
use crate::audio::levels::LevelMeter;
use crate::audio::signals::{Level, plucked_phrase};
use crate::audio::wav::{SampleFormat, WavOptions, WavWriter};
use crate::quantity;
use crate::render::{RenderError, SoundLevels, SoundMeter, SoundStage, default_factor};

/// Sampling rate, Hz.
const RATE: u32 = 48_000;
/// The phrase: its peak and its seed, those of `signals/plucked-phrase.wav`.
const PEAK: Level = Level::PeakDbfs(-6.0);
const SEED: u64 = 1;
/// True peak of the loudest file, as a ratio: −1 dBTP.
const HIGHEST: f64 = 0.891_250_938_133_745_5;

/// One file written.
pub struct Rendered {
    /// V peak at digital full scale of the input.
    pub input_full_scale: f64,
    /// V peak at digital full scale of the file.
    pub output_full_scale: f64,
    /// What it measures.
    pub levels: SoundLevels,
}

/// Render the phrase at every drive; write it and its outputs into `folder`.
pub fn render(
    stage: &SoundStage,
    drives: &[Drive],
    folder: &Path,
    guard: &Guard,
) -> Result<Vec<Rendered>, CommandError> {
    let phrase = plucked_phrase(RATE, PEAK, SEED);
    write(&folder.join("input.wav"), &phrase)?;
    let peak = LevelMeter::of(&phrase).peak();
    // so that the phrase peaks where the sine of the drive does
    let full_scales: Vec<f64> = drives
        .iter()
        .map(|drive| {
            let level = quantity::Level {
                rms: drive.point.level,
            };
            level.peak() / peak
        })
        .collect();
    let volts: Result<Vec<Vec<f64>>, RenderError> = full_scales
        .par_iter()
        .map(|full_scale| through(stage, &phrase, *full_scale))
        .collect();
    let volts = volts.map_err(CommandError::render(Path::new(STAGE)))?;
    guard.check()?;
    let scales = equally_loud(&volts)?;
    let mut files = Vec::new();
    for (k, drive) in drives.iter().enumerate() {
        let samples: Vec<f64> = volts[k].iter().map(|v| v / scales[k]).collect();
        write(&folder.join(format!("output-{}.wav", drive.name)), &samples)?;
        files.push(Rendered {
            input_full_scale: full_scales[k],
            output_full_scale: scales[k],
            levels: measured(&samples)?,
        });
    }
    Ok(files)
}

/// The output in V.
fn through(stage: &SoundStage, phrase: &[f64], full_scale: f64) -> Result<Vec<f64>, RenderError> {
    let rate = f64::from(RATE);
    let mut renderer = stage.renderer(1, rate, default_factor(rate))?;
    let emf: Vec<f64> = phrase.iter().map(|sample| sample * full_scale).collect();
    let mut volts = renderer.push(&[emf])?[0].clone();
    volts.extend_from_slice(&renderer.finish()?[0]);
    Ok(volts)
}

/// The full scale in V of each sound at which all have one loudness (BS.1770) and the highest true peak is −1 dBTP.
fn equally_loud(sounds: &[Vec<f64>]) -> Result<Vec<f64>, CommandError> {
    let mut fitted = Vec::new();
    for volts in sounds {
        let scale = measured(volts)?.true_peak.max(f64::MIN_POSITIVE) / HIGHEST;
        let samples: Vec<f64> = volts.iter().map(|v| v / scale).collect();
        fitted.push((scale, measured(&samples)?.loudness_lufs));
    }
    let quietest = fitted.iter().filter_map(|(_, loudness)| *loudness);
    let quietest = quietest.fold(f64::INFINITY, f64::min);
    let excess = |loudness: Option<f64>| loudness.map_or(0.0, |lufs| lufs - quietest);
    Ok(fitted
        .into_iter()
        .map(|(scale, loudness)| scale * 10f64.powf(excess(loudness) / 20.0))
        .collect())
}

fn measured(samples: &[f64]) -> Result<SoundLevels, CommandError> {
    let mut meter = SoundMeter::new(1, RATE)?;
    meter.push(&[samples])?;
    Ok(meter.finish())
}

fn write(path: &Path, samples: &[f64]) -> Result<(), CommandError> {
    let options = WavOptions {
        overwrite: true,
        seed: SEED,
        ..WavOptions::new(RATE, 1, SampleFormat::S24)
    };
    let mut writer = WavWriter::create(path, options)?;
    writer.write_block(&[samples])?;
    writer.finish()?;
    Ok(())
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::audio::signals::sine;

    #[test]
    fn a_loud_and_a_quiet_sound_become_equally_loud_below_full_scale() {
        // Of equal peak, half the time silent and never: the mean power of the second is larger.
        let steady = sine(RATE, 1000.0, -20.0, 96_000).unwrap();
        let mut broken: Vec<f64> = steady.iter().map(|x| 50.0 * x).collect();
        broken
            .iter_mut()
            .enumerate()
            .filter(|(k, _)| k % 9600 > 4800)
            .for_each(|(_, x)| *x = 0.0);
        let sounds = [steady, broken];
        let scales = equally_loud(&sounds).unwrap();
        let levels: Vec<SoundLevels> = sounds
            .iter()
            .zip(&scales)
            .map(|(sound, scale)| {
                let samples: Vec<f64> = sound.iter().map(|x| x / scale).collect();
                measured(&samples).unwrap()
            })
            .collect();
        let loudness: Vec<f64> = levels.iter().filter_map(|l| l.loudness_lufs).collect();
        assert!((loudness[0] - loudness[1]).abs() < 1e-9, "{loudness:?}");
        let highest = levels.iter().map(|l| l.true_peak).fold(0.0, f64::max);
        assert!((highest / HIGHEST - 1.0).abs() < 1e-12, "{highest}");
    }
}
