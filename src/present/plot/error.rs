//! What can go wrong with a picture.

use crate::failure::FailureKind;
use std::fmt;
use std::path::PathBuf;

/// Why a picture was not drawn or not written.
#[derive(Debug)]
pub enum PlotError {
    /// The file name ends in neither `.svg` nor `.png`.
    UnknownExtension {
        /// The file asked for.
        path: PathBuf,
    },
    /// The file exists and overwriting was not asked for; it is left as it was.
    Exists {
        /// The file asked for.
        path: PathBuf,
    },
    /// The folder or the file cannot be written; an existing file is left as it was.
    Write {
        /// The file asked for.
        path: PathBuf,
        /// What the operating system said.
        source: std::io::Error,
    },
    /// The report holds nothing that this picture shows.
    NothingToDraw {
        /// What would have been drawn, and what is missing.
        what: String,
    },
    /// The drawing library failed.
    Draw {
        /// Its own words.
        cause: String,
    },
}

impl PlotError {
    /// The class of the failure, from which the exit code comes.
    pub fn kind(&self) -> FailureKind {
        match self {
            PlotError::NothingToDraw { .. } => FailureKind::NoAnswer,
            _ => FailureKind::BadRequest,
        }
    }

    pub(super) fn nothing(what: &str) -> Self {
        PlotError::NothingToDraw {
            what: what.to_string(),
        }
    }

    pub(super) fn draw(cause: impl fmt::Display) -> Self {
        PlotError::Draw {
            cause: cause.to_string(),
        }
    }
}

impl fmt::Display for PlotError {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            PlotError::UnknownExtension { path } => {
                let path = path.display();
                write!(
                    out,
                    "{path}: a picture is written as .svg or .png; end the file name in one of them"
                )
            }
            PlotError::Exists { path } => {
                write!(
                    out,
                    "{}: exists and is kept; add --overwrite to replace it",
                    path.display()
                )
            }
            PlotError::Write { path, source } => {
                write!(
                    out,
                    "{}: cannot be written: {source}; check the folder and its rights",
                    path.display()
                )
            }
            PlotError::NothingToDraw { what } => write!(out, "no picture: {what}"),
            PlotError::Draw { cause } => write!(out, "the picture could not be drawn: {cause}"),
        }
    }
}

impl std::error::Error for PlotError {
    fn source(&self) -> Option<&(dyn std::error::Error + 'static)> {
        match self {
            PlotError::Write { source, .. } => Some(source),
            _ => None,
        }
    }
}
