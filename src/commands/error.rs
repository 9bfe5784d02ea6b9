//! Why a command ends without its result.

use std::fmt;
use std::io;
use std::path::{Path, PathBuf};

use crate::audio::AudioError;
use crate::engine::EngineError;
use crate::failure::FailureKind;
use crate::present::plot::PlotError;
use crate::render::RenderError;
use crate::stage::starters::UnknownStarter;
use crate::stage::{OverrideError, StageError};

/// A failure of any layer, told once at the end of the run.
#[derive(Debug)]
pub enum CommandError {
    /// No starter of that name.
    Starter(UnknownStarter),
    /// The stage file is wrong.
    Stage(StageError),
    /// A `--set` is wrong.
    Override(OverrideError),
    /// The stage has no answer.
    Engine {
        /// The stage file as given.
        stage: PathBuf,
        /// Why.
        error: EngineError,
    },
    /// A sound file or its settings.
    Audio(AudioError),
    /// A picture.
    Plot(PlotError),
    /// A file exists and is kept.
    Exists {
        /// The file as given.
        path: PathBuf,
    },
    /// A file or folder that cannot be written.
    Unwritable {
        /// The file as given.
        path: PathBuf,
        /// What the operating system said.
        source: io::Error,
    },
    /// Standard output cannot be written, other than by nobody reading it.
    Output(io::Error),
    /// `-` where only a file will do.
    NeedsFile {
        /// What the file is for.
        what: &'static str,
    },
    /// The output would replace a file the command reads.
    OutputIsInput {
        /// The file as given.
        path: PathBuf,
    },
    /// A sound file that is not named as one.
    NotNamedWav {
        /// The file as given.
        path: PathBuf,
    },
    /// Stopped by the user.
    Interrupted,
}

impl CommandError {
    /// The class of the failure, from which the exit code comes.
    pub fn kind(&self) -> FailureKind {
        match self {
            CommandError::Starter(error) => error.kind(),
            CommandError::Stage(error) => error.kind(),
            CommandError::Override(error) => error.kind(),
            CommandError::Engine { error, .. } => error.kind(),
            CommandError::Audio(error) => error.kind(),
            CommandError::Plot(error) => error.kind(),
            CommandError::Interrupted => FailureKind::Interrupted,
            CommandError::Exists { .. }
            | CommandError::Unwritable { .. }
            | CommandError::Output(_)
            | CommandError::OutputIsInput { .. }
            | CommandError::NotNamedWav { .. }
            | CommandError::NeedsFile { .. } => FailureKind::BadRequest,
        }
    }

    /// An error of rendering, with the stage it concerns.
    pub fn render(stage: &Path) -> impl Fn(RenderError) -> CommandError + use<'_> {
        |error| match error {
            RenderError::Engine(error) => CommandError::engine(stage)(error),
            RenderError::Audio(error) => CommandError::Audio(error),
        }
    }

    /// An engine's error, with the stage it concerns.
    pub fn engine(stage: &Path) -> impl Fn(EngineError) -> CommandError + use<'_> {
        |error| CommandError::Engine {
            stage: stage.to_owned(),
            error,
        }
    }
}

impl fmt::Display for CommandError {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            CommandError::Starter(error) => error.fmt(out),
            CommandError::Stage(error) => error.fmt(out),
            CommandError::Override(error) => error.fmt(out),
            CommandError::Engine { stage, error } => write!(out, "{}: {error}", stage.display()),
            CommandError::Audio(error) => error.fmt(out),
            CommandError::Plot(error) => error.fmt(out),
            CommandError::Exists { path } => write!(
                out,
                "{}: exists and is kept; name another file or give --overwrite",
                path.display()
            ),
            CommandError::Unwritable { path, source } => write!(
                out,
                "{}: cannot be written: {source}; check the folder and its rights",
                path.display()
            ),
            CommandError::Output(source) => {
                write!(out, "standard output cannot be written: {source}")
            }
            CommandError::NeedsFile { what } => {
                write!(out, "-: {what} must be an ordinary file, not a pipe")
            }
            CommandError::OutputIsInput { path } => write!(
                out,
                "{}: is what the command reads; name another output file",
                path.display()
            ),
            CommandError::NotNamedWav { path } => write!(
                out,
                "{}: the output is a WAV file; let its name end in .wav",
                path.display()
            ),
            CommandError::Interrupted => write!(out, "interrupted; nothing half-written is left"),
        }
    }
}

impl std::error::Error for CommandError {
    fn source(&self) -> Option<&(dyn std::error::Error + 'static)> {
        match self {
            CommandError::Unwritable { source, .. } | CommandError::Output(source) => Some(source),
            _ => None,
        }
    }
}

impl From<UnknownStarter> for CommandError {
    fn from(error: UnknownStarter) -> Self {
        CommandError::Starter(error)
    }
}

impl From<StageError> for CommandError {
    fn from(error: StageError) -> Self {
        CommandError::Stage(error)
    }
}

impl From<OverrideError> for CommandError {
    fn from(error: OverrideError) -> Self {
        CommandError::Override(error)
    }
}

impl From<AudioError> for CommandError {
    fn from(error: AudioError) -> Self {
        CommandError::Audio(error)
    }
}

impl From<PlotError> for CommandError {
    fn from(error: PlotError) -> Self {
        CommandError::Plot(error)
    }
}
