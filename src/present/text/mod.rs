//! Tables for people, on standard output. Plain text, no colour: the same bytes on a terminal, in a pipe, in a file.

mod bias;
mod distortion;
mod drives;
mod listen;

pub use bias::bias;
pub(super) use distortion::{bandwidth, definition};
pub use distortion::{distortion, tables as distortion_tables};
pub use drives::{DrivenSound, driven_sounds};
pub use listen::listen;

use super::conditions;
use super::format::plain;
use crate::measure::report::Conditions;

/// Cautions, a line each; empty where there are none. The tables end with them; a command that prints JSON or CSV
/// sends them to standard error.
pub fn cautions(cautions: &[String]) -> String {
    cautions
        .iter()
        .map(|caution| format!("caution: {}\n", plain(caution)))
        .collect()
}

/// Title and conditions, as they stand over every table.
fn heading(title: &str, held: &Conditions) -> String {
    let mut text = format!("{}\n", plain(title));
    for line in conditions::lines(held) {
        text += &line;
        text.push('\n');
    }
    text
}
