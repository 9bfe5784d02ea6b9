//! Why sound does not come through.

use std::fmt;

use crate::audio::AudioError;
use crate::engine::EngineError;
use crate::failure::FailureKind;

/// A failure of rendering.
#[derive(Debug)]
pub enum RenderError {
    /// The stage has no answer.
    Engine(EngineError),
    /// The sound or its settings.
    Audio(AudioError),
}

impl RenderError {
    /// The class of the failure.
    pub fn kind(&self) -> FailureKind {
        match self {
            RenderError::Engine(error) => error.kind(),
            RenderError::Audio(error) => error.kind(),
        }
    }
}

impl fmt::Display for RenderError {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            RenderError::Engine(error) => error.fmt(out),
            RenderError::Audio(error) => error.fmt(out),
        }
    }
}

impl std::error::Error for RenderError {}

impl From<EngineError> for RenderError {
    fn from(error: EngineError) -> Self {
        RenderError::Engine(error)
    }
}

impl From<AudioError> for RenderError {
    fn from(error: AudioError) -> Self {
        RenderError::Audio(error)
    }
}
