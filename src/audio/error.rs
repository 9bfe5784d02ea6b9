//! What can go wrong with sound: files that cannot be read or written, requests out of range.

use std::fmt;
use std::path::PathBuf;

use crate::failure::FailureKind;

/// A failure of the audio layer; every message says where, what was found and what would be right.
#[derive(Debug)]
pub enum AudioError {
    /// The file cannot be opened, read, created or written.
    File {
        /// The file as the user named it.
        path: PathBuf,
        /// What was being done, as in "cannot ... it".
        action: &'static str,
        /// The system's reason.
        source: std::io::Error,
    },
    /// The file has no bytes at all.
    Empty {
        /// The file as the user named it.
        path: PathBuf,
    },
    /// The file is something other than a RIFF WAVE file.
    NotWav {
        /// The file as the user named it.
        path: PathBuf,
        /// What stands where the RIFF/WAVE marks should be.
        found: String,
    },
    /// The header promises more than the file holds.
    Truncated {
        /// The file as the user named it.
        path: PathBuf,
        /// Where it ends, and what was promised.
        detail: String,
    },
    /// The header contradicts itself.
    Malformed {
        /// The file as the user named it.
        path: PathBuf,
        /// The contradiction.
        detail: String,
    },
    /// A sample format, channel count or coding that is not read here.
    Unsupported {
        /// The file as the user named it.
        path: PathBuf,
        /// The format found.
        found: String,
    },
    /// The header is right and there is not one frame of sound behind it.
    NoSound {
        /// The file as the user named it.
        path: PathBuf,
    },
    /// The sampling rate is outside 8 to 192 kHz.
    Rate {
        /// The file as the user named it.
        path: PathBuf,
        /// The rate found, in hertz.
        found: u32,
    },
    /// A sample that is not a finite number.
    NotFinite {
        /// The file as the user named it.
        path: PathBuf,
        /// Frame, counted from 0.
        frame: u64,
        /// Channel, counted from 1.
        channel: usize,
        /// The sample found.
        found: f64,
    },
    /// The target exists and was not to be replaced.
    Exists {
        /// The file as the user named it.
        path: PathBuf,
    },
    /// The target exists and is a directory or a device.
    NotAFile {
        /// The file as the user named it.
        path: PathBuf,
    },
    /// More sound than the 32-bit lengths of a WAV file can state.
    TooLong {
        /// The file as the user named it.
        path: PathBuf,
    },
    /// Channels of unequal length, or another number of them than announced.
    Shape {
        /// The contradiction.
        detail: String,
    },
    /// An option word that is not known.
    Word {
        /// What the word chooses.
        what: &'static str,
        /// The word found.
        found: String,
        /// The words allowed.
        allowed: &'static str,
    },
    /// A number outside its range.
    Range {
        /// What the number is.
        what: &'static str,
        /// The value found.
        found: f64,
        /// The range allowed, with its unit.
        allowed: String,
    },
}

impl AudioError {
    /// Every failure of this layer is one of the request, a file or its input/output.
    pub fn kind(&self) -> FailureKind {
        FailureKind::BadRequest
    }
}

impl fmt::Display for AudioError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::File {
                path,
                action,
                source,
            } => write!(f, "{}: cannot {action} it: {source}", path.display()),
            Self::Empty { path } => write!(
                f,
                "{}: the file is empty (0 bytes), a WAV file is needed",
                path.display()
            ),
            Self::NotWav { path, found } => write!(
                f,
                "{}: not a WAV file: it begins with {found}, not with RIFF … WAVE; convert it to 16, 24 or 32-bit WAV first",
                path.display()
            ),
            Self::Truncated { path, detail } => {
                write!(
                    f,
                    "{}: truncated: {detail}; copy or export it again",
                    path.display()
                )
            }
            Self::Malformed { path, detail } => {
                write!(
                    f,
                    "{}: malformed WAV header: {detail}; export it again",
                    path.display()
                )
            }
            Self::Unsupported { path, found } => write!(
                f,
                "{}: {found} is not read; 1 to 8 channels of 16, 24 or 32-bit integer or 32-bit float are",
                path.display()
            ),
            Self::NoSound { path } => {
                write!(
                    f,
                    "{}: the data chunk is empty, at least one frame of sound is needed",
                    path.display()
                )
            }
            Self::Rate { path, found } => write!(
                f,
                "{}: sampling rate {found} Hz is outside 8000 to 192000 Hz; resample it first",
                path.display()
            ),
            Self::NotFinite {
                path,
                frame,
                channel,
                found,
            } => write!(
                f,
                "{}: frame {frame}, channel {channel}: sample is {found}, must be a finite number",
                path.display()
            ),
            Self::Exists { path } => {
                write!(
                    f,
                    "{}: exists already and is kept; name another file or give --overwrite",
                    path.display()
                )
            }
            Self::NotAFile { path } => {
                write!(
                    f,
                    "{}: is a directory or a device, an ordinary file is needed",
                    path.display()
                )
            }
            Self::TooLong { path } => write!(
                f,
                "{}: more than 4 GiB of sound do not fit a WAV file; write fewer bits, channels or minutes",
                path.display()
            ),
            Self::Shape { detail } => write!(f, "channels do not fit together: {detail}"),
            Self::Word {
                what,
                found,
                allowed,
            } => write!(f, "{what} \"{found}\" is not known; use {allowed}"),
            Self::Range {
                what,
                found,
                allowed,
            } => write!(f, "{what} is {found}, must be {allowed}"),
        }
    }
}

impl std::error::Error for AudioError {
    fn source(&self) -> Option<&(dyn std::error::Error + 'static)> {
        match self {
            Self::File { source, .. } => Some(source),
            _ => None,
        }
    }
}
