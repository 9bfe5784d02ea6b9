//! The faults of a stage file, all of them, each with its place.

use std::fmt;

use crate::failure::FailureKind;

/// Faults kept; of the rest only the number is told.
const MOST_FAULTS: usize = 50;

/// One fault of a stage file.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Fault {
    /// Line, from 1.
    pub line: usize,
    /// Column in characters, from 1.
    pub column: usize,
    /// What was found there, what would be right, what to do.
    pub message: String,
}

/// Something unusual that is no fault.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Caution {
    /// Line in the stage file, from 1; 0 where there is none.
    pub line: usize,
    /// In words.
    pub message: String,
}

/// Why there is no stage.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum StageError {
    /// The file cannot be read.
    Unreadable {
        /// Its name as given.
        file: String,
        /// Why, in words.
        reason: String,
    },
    /// The file is read and faulty.
    Faulty {
        /// Its name as given.
        file: String,
        /// The faults in file order, at least one.
        faults: Vec<Fault>,
        /// How many more there are.
        more: usize,
    },
}

impl StageError {
    /// A wrong file is a fault of the request.
    pub fn kind(&self) -> FailureKind {
        FailureKind::BadRequest
    }
}

impl fmt::Display for StageError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            StageError::Unreadable { file, reason } => write!(f, "{file}: {reason}"),
            StageError::Faulty { file, faults, more } => {
                for (index, fault) in faults.iter().enumerate() {
                    let separator = if index == 0 { "" } else { "\n" };
                    write!(
                        f,
                        "{separator}{file}:{}:{}: {}",
                        fault.line, fault.column, fault.message
                    )?;
                }
                if *more > 0 {
                    write!(f, "\n{file}: and {more} more")?;
                }
                Ok(())
            }
        }
    }
}

impl std::error::Error for StageError {}

/// Collects faults by their place; builds no message beyond the limit, so that a hostile file costs little.
#[derive(Debug)]
pub(super) struct Faults<P> {
    found: Vec<(P, String)>,
    more: usize,
}

impl<P> Default for Faults<P> {
    fn default() -> Self {
        Faults {
            found: Vec::new(),
            more: 0,
        }
    }
}

impl<P> Faults<P> {
    pub(super) fn add(&mut self, at: P, message: impl FnOnce() -> String) {
        if self.found.len() < MOST_FAULTS {
            self.found.push((at, message()));
        } else {
            self.more += 1;
        }
    }

    pub(super) fn is_empty(&self) -> bool {
        self.found.is_empty()
    }

    pub(super) fn into_found(self) -> impl Iterator<Item = (P, String)> {
        self.found.into_iter()
    }

    /// Takes over the faults of another collection, each at the place `at` gives.
    pub(super) fn take_over<Q>(&mut self, other: Faults<Q>, at: impl Fn(&Q) -> P) {
        self.more += other.more;
        for (place, message) in other.found {
            self.add(at(&place), || message);
        }
    }
}

impl Faults<usize> {
    /// The error of all faults, in file order.
    pub(super) fn into_error(mut self, file: &str, lines: &Lines) -> StageError {
        self.found.sort_by_key(|(at, _)| *at);
        self.found.dedup();
        let faults = self.found.into_iter().map(|(at, message)| {
            let (line, column) = lines.place(at);
            Fault {
                line,
                column,
                message,
            }
        });
        StageError::Faulty {
            file: file.to_owned(),
            faults: faults.collect(),
            more: self.more,
        }
    }
}

/// Where the lines of a text begin.
pub(super) struct Lines<'t> {
    text: &'t str,
    starts: Vec<usize>,
}

impl<'t> Lines<'t> {
    pub(super) fn of(text: &'t str) -> Self {
        let after_breaks = text
            .bytes()
            .enumerate()
            .filter(|(_, byte)| *byte == b'\n')
            .map(|(at, _)| at + 1);
        Lines {
            text,
            starts: std::iter::once(0).chain(after_breaks).collect(),
        }
    }

    /// Line from 1 of a byte offset.
    pub(super) fn line(&self, at: usize) -> usize {
        self.starts.partition_point(|start| *start <= at)
    }

    /// Line and column from 1 of a byte offset, the column in characters.
    pub(super) fn place(&self, at: usize) -> (usize, usize) {
        let line = self.line(at);
        let start = self.starts[line - 1];
        let column = self
            .text
            .get(start..at)
            .map_or(at.saturating_sub(start), |before| before.chars().count());
        (line, column + 1)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn columns_count_characters_not_bytes() {
        let lines = Lines::of("a\nµµx\r\nlast");
        assert_eq!(lines.place(0), (1, 1));
        assert_eq!(lines.place(2 + 4), (2, 3));
        assert_eq!(lines.place(9), (3, 1));
        assert_eq!(lines.place(13), (3, 5));
    }

    #[test]
    fn faults_beyond_the_limit_are_counted_in_file_order() {
        let text = "\n".repeat(80);
        let mut faults = Faults::default();
        for at in (0..80).rev() {
            faults.add(at, || format!("fault {at}"));
        }
        let StageError::Faulty { faults, more, .. } = faults.into_error("f", &Lines::of(&text))
        else {
            panic!()
        };
        assert_eq!((faults.len(), more, faults[0].line), (50, 30, 31));
    }
}
