//! WAV files in and out, streamed, through hound.
//!
//! Full scale is ±1 whatever the format: a code c of n bits is c/2^(n−1), and a float is itself.

mod header;
mod reader;
mod writer;

use std::str::FromStr;

use super::AudioError;
pub use reader::WavReader;
pub use writer::{WavOptions, WavWriter, Written};

/// Sampling rates accepted, in hertz.
pub const RATES: std::ops::RangeInclusive<u32> = 8_000..=192_000;
/// The largest number of channels accepted.
pub const MAX_CHANNELS: u16 = 8;

/// How a sample is stored.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum SampleFormat {
    /// 32-bit float: no full scale to hit, no dither.
    F32,
    /// 16-bit integer.
    S16,
    /// 24-bit integer.
    S24,
    /// 32-bit integer.
    S32,
}

impl SampleFormat {
    /// Bits of one sample.
    pub fn bits(self) -> u16 {
        match self {
            Self::S16 => 16,
            Self::S24 => 24,
            Self::F32 | Self::S32 => 32,
        }
    }

    /// The word that chooses it, as in `--format s24`.
    pub fn word(self) -> &'static str {
        match self {
            Self::F32 => "f32",
            Self::S16 => "s16",
            Self::S24 => "s24",
            Self::S32 => "s32",
        }
    }

    /// Whether samples are integers, which clip and want dither.
    pub fn is_integer(self) -> bool {
        self != Self::F32
    }
}

impl FromStr for SampleFormat {
    type Err = AudioError;

    fn from_str(word: &str) -> Result<Self, AudioError> {
        [Self::F32, Self::S16, Self::S24, Self::S32]
            .into_iter()
            .find(|format| format.word() == word)
            .ok_or_else(|| AudioError::Word {
                what: "sample format",
                found: word.to_owned(),
                allowed: "f32, s16, s24 or s32",
            })
    }
}

/// What a WAV file holds.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct WavSpec {
    /// Sampling rate in hertz.
    pub rate: u32,
    /// Number of channels.
    pub channels: usize,
    /// How samples are stored.
    pub format: SampleFormat,
    /// Sample instants; each has a sample of every channel.
    pub frames: u64,
}

impl WavSpec {
    /// Length in seconds.
    pub fn seconds(&self) -> f64 {
        self.frames as f64 / f64::from(self.rate)
    }
}

#[cfg(test)]
mod tests;
