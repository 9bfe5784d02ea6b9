//! Stage files to start from: invented scenarios, standard values, each with the reason of every part.

use std::fmt;

use super::names;
use crate::failure::FailureKind;
use crate::quantity::quoted;

/// A stage file that comes with the program.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Starter {
    /// Its name: a–z, 0–9 and hyphens.
    pub name: &'static str,
    /// What it is for, one line.
    pub purpose: &'static str,
    /// The stage file.
    pub text: &'static str,
}

/// No starter has that name.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct UnknownStarter {
    /// The name asked for.
    pub name: String,
}

impl UnknownStarter {
    /// A wrong name is a fault of the request.
    pub fn kind(&self) -> FailureKind {
        FailureKind::BadRequest
    }
}

impl fmt::Display for UnknownStarter {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let names = || list().iter().map(|starter| starter.name);
        let hint = names::hint(&self.name, names());
        let known = names().collect::<Vec<_>>().join(", ");
        let known = if hint.is_empty() {
            format!("; there are {known}")
        } else {
            hint
        };
        write!(f, "no starter {}{known}", quoted(&self.name))
    }
}

impl std::error::Error for UnknownStarter {}

/// Every starter, simplest first.
pub fn list() -> &'static [Starter] {
    &[
        Starter {
            name: "common-emitter-split",
            purpose: "one transistor, split emitter resistor, 23 dB from a 600 ohm line",
            text: include_str!("starters/common-emitter-split.toml"),
        },
        Starter {
            name: "series-feedback-pair",
            purpose: "two transistors, direct coupled with series feedback, 36 dB from a microphone",
            text: include_str!("starters/series-feedback-pair.toml"),
        },
    ]
}

/// The starter of that name.
pub fn find(name: &str) -> Result<&'static Starter, UnknownStarter> {
    list()
        .iter()
        .find(|starter| starter.name == name)
        .ok_or_else(|| UnknownStarter {
            name: name.to_owned(),
        })
}

#[cfg(test)]
mod tests {
    use super::super::Stage;
    use super::*;

    #[test]
    fn every_starter_reads_without_a_fault_or_a_caution() {
        for starter in list() {
            let (stage, cautions) = Stage::from_text(starter.name, starter.text)
                .unwrap_or_else(|error| panic!("{error}"));
            assert_eq!(cautions, [], "{}", starter.name);
            assert_eq!(stage.targets.len(), 2, "{}", starter.name);
            assert!(stage.nominal_input.is_some(), "{}", starter.name);
        }
    }

    #[test]
    fn the_overrides_suggested_at_the_top_of_a_starter_apply() {
        for starter in list() {
            let stage = Stage::from_text(starter.name, starter.text).unwrap().0;
            let suggested: Vec<_> = starter
                .text
                .lines()
                .filter(|line| line.starts_with("#   cleanswing"))
                .collect();
            let changes = suggested
                .iter()
                .flat_map(|line| line.split("--set ").skip(1));
            let changes: Vec<_> = changes
                .filter_map(|rest| rest.split_whitespace().next())
                .collect();
            assert_eq!(changes.len(), 2, "{}", starter.name);
            for change in changes {
                stage
                    .with(&change.parse().unwrap())
                    .unwrap_or_else(|error| panic!("{}: {error}", starter.name));
            }
        }
    }

    #[test]
    fn starter_names_are_lower_case_words_and_hyphens() {
        for starter in list() {
            assert!(
                starter
                    .name
                    .chars()
                    .all(|c| c.is_ascii_lowercase() || c.is_ascii_digit() || c == '-')
            );
            assert!(!starter.purpose.contains('\n'));
        }
    }

    #[test]
    fn a_misspelt_starter_is_met_with_the_nearest_name() {
        assert_eq!(
            find("series-feedback-pair").unwrap().name,
            "series-feedback-pair"
        );
        assert_eq!(
            find("series-feedbak-pair").unwrap_err().to_string(),
            "no starter \"series-feedbak-pair\"; did you mean \"series-feedback-pair\"?"
        );
        assert_eq!(
            find("amp").unwrap_err().to_string(),
            "no starter \"amp\"; there are common-emitter-split, series-feedback-pair"
        );
    }
}
