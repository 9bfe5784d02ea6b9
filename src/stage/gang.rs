//! `gang`: a potentiometer whose turn follows another's.

use std::collections::HashMap;

use super::description::{Part, PartKind};
use super::names;
use super::table::{Fields, Reader};
use crate::quantity::quoted;

/// Gives every ganged potentiometer the turn of the one it follows; faults for unknown names and circles.
pub(super) fn follow(reader: &mut Reader, section: &Fields, parts: &mut [Part]) {
    for (part, error) in propagate(parts) {
        let entry = section.get(&part).and_then(|entry| entry.value.as_table());
        let at = entry
            .and_then(|table| table.get("gang"))
            .map_or(section.at, |gang| gang.span().start);
        reader.fault(at, || format!("{part}: gang {error}"));
    }
}

/// Copies turns along the gangs; returns each part whose gang leads nowhere, with the reason.
pub(super) fn propagate(parts: &mut [Part]) -> Vec<(String, String)> {
    let index: HashMap<&str, usize> = parts
        .iter()
        .enumerate()
        .map(|(i, part)| (part.name.as_str(), i))
        .collect();
    let ganged: Vec<usize> = (0..parts.len())
        .filter(|i| gang_of(&parts[*i]).is_some())
        .collect();
    let mut faults = Vec::new();
    let mut turns = Vec::new();
    for part in ganged {
        match leader(parts, &index, part) {
            Ok(turn) => turns.push((part, turn)),
            Err(error) => faults.push((parts[part].name.clone(), error)),
        }
    }
    for (part, value) in turns {
        if let PartKind::Potentiometer { turn, .. } = &mut parts[part].kind {
            *turn = value;
        }
    }
    faults
}

fn gang_of(part: &Part) -> Option<&str> {
    match &part.kind {
        PartKind::Potentiometer { gang, .. } => gang.as_deref(),
        _ => None,
    }
}

fn is_track(part: &Part) -> bool {
    matches!(part.kind, PartKind::Potentiometer { .. })
}

/// The most potentiometers on one spindle, one behind the other; more is a circle or a joke.
const LONGEST: usize = 64;

/// The turn of the potentiometer at the head of the gang.
fn leader(parts: &[Part], index: &HashMap<&str, usize>, start: usize) -> Result<f64, String> {
    let mut current = start;
    for _ in 0..LONGEST {
        let PartKind::Potentiometer { turn, gang, .. } = &parts[current].kind else {
            return Err(format!(
                "names {}, which is no potentiometer",
                quoted(&parts[current].name)
            ));
        };
        let Some(next) = gang else { return Ok(*turn) };
        current = *index.get(next.as_str()).ok_or_else(|| {
            format!(
                "names no part {}{}",
                quoted(next),
                names::hint(
                    next,
                    parts
                        .iter()
                        .filter(|part| is_track(part))
                        .map(|part| part.name.as_str())
                )
            )
        })?;
    }
    Err(format!(
        "leads back to {} itself",
        quoted(&parts[start].name)
    ))
}
