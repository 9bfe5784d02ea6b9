//! What was rendered, with its conditions.

use super::SoundLevels;
use crate::audio::wav::SampleFormat;
use crate::engine::transient::StepRule;

/// Input or output of a rendering.
#[derive(Clone, Debug, PartialEq)]
pub struct Side {
    /// The file as named.
    pub path: String,
    /// How its samples are stored.
    pub format: SampleFormat,
    /// Digital full scale, V peak.
    pub full_scale: f64,
    /// Where that full scale comes from, where it was not stated: `assumed`, `fit to -1 dBTP`.
    pub full_scale_note: Option<String>,
    /// What was measured, relative to full scale.
    pub levels: SoundLevels,
}

/// Everything `listen` tells.
#[derive(Clone, Debug, PartialEq)]
pub struct RenderReport {
    /// What went in.
    pub input: Side,
    /// What came out.
    pub output: Side,
    /// Sampling rate, Hz.
    pub rate: u32,
    /// Channels.
    pub channels: usize,
    /// Length, s.
    pub seconds: f64,
    /// Steps a sample.
    pub factor: usize,
    /// The rule of those steps.
    pub rule: StepRule,
    /// Output samples beyond full scale and held there.
    pub clipped_samples: u64,
    /// Seconds of sound rendered in a second, writing included.
    pub speed: f64,
    /// Cautions in words.
    pub cautions: Vec<String>,
}
