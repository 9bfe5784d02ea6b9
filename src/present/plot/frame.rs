//! What stands around every plot: title and subject above, conditions below.

use super::font;
use super::ink::{INK, QUIET};
use super::picture::{Anchor, Area, Picture, Text};
use crate::measure::report::Conditions;
use crate::present::conditions;
use crate::present::format::plain;

/// Free border of the sheet, px.
const MARGIN: f64 = 36.0;
/// Ems of the title, the subject and the notes, px: large enough to read on a sheet shrunk to a third.
const TITLE_EM: f64 = 38.0;
const SUBJECT_EM: f64 = 30.0;
const NOTE_EM: f64 = 25.0;
/// Em of tick labels, axis titles and legends, px.
pub(super) const LABEL_EM: f64 = 27.0;
/// Distance of base lines over the em.
const LEADING: f64 = 1.3;

/// A sheet with its words around the edge and the middle free.
pub(super) struct Frame {
    pub(super) picture: Picture,
    /// Where plots may go.
    pub(super) middle: Area,
}

impl Frame {
    /// A sheet of `size` px. `remarks` come before the conditions.
    pub(super) fn new(
        size: (f64, f64),
        title: &str,
        subject: &str,
        remarks: &[String],
        held: &Conditions,
    ) -> Self {
        let (width, height) = size;
        let mut picture = Picture::new(width, height);
        let room = width - 2.0 * MARGIN;
        let mut y = MARGIN - 6.0;
        for line in wrapped(&plain(title), TITLE_EM, true, room, 2) {
            y += TITLE_EM * LEADING;
            picture.text(words(line, (MARGIN, y), TITLE_EM, true));
        }
        for line in wrapped(subject, SUBJECT_EM, false, room, 2) {
            y += SUBJECT_EM * LEADING + 4.0;
            picture.text(words(line, (MARGIN, y), SUBJECT_EM, false));
        }
        let notes = remarks.iter().cloned().chain(conditions::lines(held));
        let notes: Vec<String> = notes
            .flat_map(|note| wrapped(&note, NOTE_EM, false, room, 3))
            .collect();
        let first =
            height - MARGIN + 8.0 - (notes.len().saturating_sub(1)) as f64 * NOTE_EM * LEADING;
        for (index, note) in notes.into_iter().enumerate() {
            let at = (MARGIN, first + index as f64 * NOTE_EM * LEADING);
            picture.text(Text {
                colour: QUIET,
                ..words(note, at, NOTE_EM, false)
            });
        }
        let middle = Area {
            left: MARGIN,
            top: y + 28.0,
            right: width - MARGIN,
            bottom: first - NOTE_EM * LEADING - 6.0,
        };
        Frame { picture, middle }
    }
}

/// A line of text in ink from its left end.
pub(super) fn words(content: String, at: (f64, f64), em: f64, bold: bool) -> Text {
    Text {
        content,
        at,
        anchor: Anchor::Left,
        em,
        bold,
        colour: INK,
    }
}

/// `text` in at most `most` lines of `room` px; what does not fit gives way to an ellipsis.
pub(super) fn wrapped(text: &str, em: f64, bold: bool, room: f64, most: usize) -> Vec<String> {
    let fits = |line: &str| font::width(line, em, bold) <= room;
    let mut lines = vec![String::new()];
    for word in text.split_whitespace() {
        let last = lines.len() - 1;
        let longer = if lines[last].is_empty() {
            word.to_string()
        } else {
            format!("{} {word}", lines[last])
        };
        if fits(&longer) || lines[last].is_empty() {
            lines[last] = longer;
        } else {
            lines.push(word.to_string());
        }
    }
    let cut = lines.len() > most;
    lines.truncate(most);
    let last = lines.len().saturating_sub(1);
    for (index, line) in lines.iter_mut().enumerate() {
        if (cut && index == last) || !fits(line) {
            shorten(line, fits);
        }
    }
    lines
}

/// Take words from the end until the line fits with an ellipsis; of a single endless word, letters.
fn shorten(line: &mut String, fits: impl Fn(&str) -> bool) {
    while !line.is_empty() && !fits(&format!("{line}…")) {
        let keep = line
            .rfind(' ')
            .or_else(|| line.char_indices().next_back().map(|(at, _)| at));
        line.truncate(keep.unwrap_or(0));
    }
    line.truncate(line.trim_end().len());
    line.push('…');
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_long_title_wraps_and_then_ends_in_an_ellipsis() {
        let text = "one two three four five six seven eight nine ten eleven twelve";
        let lines = wrapped(text, 20.0, false, 200.0, 2);
        assert_eq!(lines.len(), 2);
        assert!(lines[1].ends_with('…'), "{lines:?}");
        assert!(
            lines
                .iter()
                .all(|line| font::width(line, 20.0, false) <= 200.0)
        );
    }

    #[test]
    fn a_short_title_is_left_alone() {
        assert_eq!(
            wrapped("plain words", 20.0, true, 400.0, 2),
            ["plain words"]
        );
    }

    #[test]
    fn one_endless_word_is_cut() {
        let lines = wrapped(&"x".repeat(300), 20.0, false, 200.0, 2);
        assert!(lines.len() == 1 && lines[0].ends_with('…'), "{lines:?}");
    }
}
