//! Why a value could not be read.

use std::fmt;

use super::quote::quoted;
use crate::failure::FailureKind;

/// Why a value could not be read: what was found, and what would be right.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum ValueError {
    /// Nothing but space was given.
    Empty {
        /// What is wanted there.
        wanted: &'static str,
    },
    /// No number could be recognised.
    NotANumber {
        /// The text found.
        found: String,
        /// What is wanted there.
        wanted: &'static str,
    },
    /// A comma where the decimal point belongs.
    CommaForPoint {
        /// The text found.
        found: String,
        /// The same with a point.
        right: String,
    },
    /// What follows the number is neither prefix nor unit.
    UnknownSuffix {
        /// The text found.
        found: String,
        /// The part that was not understood.
        suffix: String,
        /// What is wanted there.
        wanted: &'static str,
    },
    /// A value in another unit than the one that belongs there.
    WrongUnit {
        /// The text found.
        found: String,
        /// The unit it is in.
        unit: &'static str,
        /// What is wanted there.
        wanted: &'static str,
    },
    /// `M` on a capacitor, which is mega and never meant.
    MegaOnCapacitor {
        /// The text found.
        found: String,
        /// The same in millifarads.
        milli: String,
        /// The same in microfarads.
        micro: String,
    },
    /// Larger than any number the program can hold.
    NotFinite {
        /// The text found.
        found: String,
    },
    /// A quantity outside the range it can have.
    OutOfRange {
        /// The text found.
        found: String,
        /// What it must be.
        must: &'static str,
    },
    /// A spelling that is nearly one of the accepted ones.
    Misspelt {
        /// The text found.
        found: String,
        /// What to write.
        right: &'static str,
    },
}

impl ValueError {
    /// A value that cannot be read is always a fault of the request.
    pub fn kind(&self) -> FailureKind {
        FailureKind::BadRequest
    }
}

impl fmt::Display for ValueError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            ValueError::Empty { wanted } => write!(f, "nothing given, needs {wanted}"),
            ValueError::NotANumber { found, wanted } => {
                write!(f, "{} is not {wanted}", quoted(found))
            }
            ValueError::CommaForPoint { found, right } => {
                write!(
                    f,
                    "{} has a comma; write {right} with a point",
                    quoted(found)
                )
            }
            ValueError::UnknownSuffix {
                found,
                suffix,
                wanted,
            } => {
                write!(
                    f,
                    "{}: {} is neither a prefix (f p n u m k M G) nor the unit; needs {wanted}",
                    quoted(found),
                    quoted(suffix)
                )
            }
            ValueError::WrongUnit {
                found,
                unit,
                wanted,
            } => {
                write!(f, "{} is in {unit}; needs {wanted}", quoted(found))
            }
            ValueError::MegaOnCapacitor {
                found,
                milli,
                micro,
            } => {
                write!(
                    f,
                    "{}: M is mega; write {micro} for microfarads or {milli} for millifarads",
                    quoted(found)
                )
            }
            ValueError::NotFinite { found } => {
                write!(f, "{} is not a finite number", quoted(found))
            }
            ValueError::OutOfRange { found, must } => write!(f, "{} {must}", quoted(found)),
            ValueError::Misspelt { found, right } => write!(f, "{}: {right}", quoted(found)),
        }
    }
}

impl std::error::Error for ValueError {}
