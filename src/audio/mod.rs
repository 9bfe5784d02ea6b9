//! Sound in files and sample streams: WAV in and out, dither, change of rate by whole factors,
//! generated signals, level measurements. Knows no stage and no engine; full scale is ±1.

pub mod dither;
pub mod error;
pub mod levels;
pub mod oversample;
pub mod random;
pub mod signals;
pub mod wav;

pub use error::AudioError;
