//! One sound through a stage at several drives.

use super::super::format::{decibels, measured, or_floor, percent, plain, stated};
use super::super::table::{Side, Table};
use crate::audio::levels::dbfs;
use crate::measure::report::DistortionPoint;
use crate::render::SoundLevels;

/// A sound at one drive.
#[derive(Clone, Copy, Debug)]
pub struct DrivenSound<'a> {
    /// What the drive is called.
    pub name: &'a str,
    /// A sine with the peak of the sound.
    pub point: &'a DistortionPoint,
    /// Digital full scale of the input, V peak.
    pub input_full_scale: f64,
    /// Digital full scale of the output, V peak.
    pub output_full_scale: f64,
    /// What the output file measures.
    pub levels: SoundLevels,
}

/// A table of them, a row a drive.
pub fn driven_sounds(sounds: &[DrivenSound]) -> String {
    let frequency = sounds.first().map_or(1000.0, |sound| sound.point.frequency);
    let columns = [
        ("drive", Side::Left),
        ("peak EMF", Side::Right),
        ("THD %", Side::Right),
        ("THD dB", Side::Right),
        ("full scale in", Side::Right),
        ("full scale out", Side::Right),
        ("dBTP", Side::Right),
        ("LUFS", Side::Right),
    ];
    let mut table = Table::new(&columns);
    for sound in sounds {
        let thd = sound.point.thd;
        let volts = |volts: f64| format!("{}pk", measured(volts, "V"));
        table.row(vec![
            plain(sound.name),
            volts(sound.point.level * std::f64::consts::SQRT_2),
            thd.map_or_else(
                || "none".to_string(),
                |thd| percent(thd, sound.point.error_estimate),
            ),
            or_floor(thd.and_then(decibels), 2),
            volts(sound.input_full_scale),
            volts(sound.output_full_scale),
            or_floor(dbfs(sound.levels.true_peak), 1),
            or_floor(sound.levels.loudness_lufs, 1),
        ]);
    }
    format!(
        "the phrase at three drives, THD of a {} sine with the same peak; files matched in loudness\n{}",
        stated(frequency, "Hz"),
        table.lines()
    )
}
