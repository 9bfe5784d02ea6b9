//! What is unusual about a stage and still computed: usual sizes are common practice, not limits.

use std::collections::HashSet;

use super::description::{PartKind, Stage};
use super::table::{Fields, Reader};
use crate::quantity::constants::ZERO_CELSIUS;
use crate::quantity::{Unit, format_engineering};

/// Notes everything unusual about `stage`.
pub(super) fn note(reader: &mut Reader, file: &Fields, stage: &Stage) {
    let celsius = stage.temperature - ZERO_CELSIUS;
    if !(-60.0..=175.0).contains(&celsius) {
        let at = file.get("temperature").map_or(0, |entry| entry.at);
        reader.caution(
            at,
            format!("temperature is {celsius:.0} °C; devices are described for -60 to 175 °C"),
        );
    }
    note_sizes(reader, stage);
    note_idle_parts(reader, file, stage);
}

fn note_sizes(reader: &mut Reader, stage: &Stage) {
    for part in &stage.parts {
        let (value, unit, low, high) = match part.kind {
            PartKind::Resistor { ohms, .. } | PartKind::Potentiometer { ohms, .. } => {
                (ohms, Unit::Ohm, 0.01, 1e9)
            }
            PartKind::Capacitor { farads, .. } => (farads, Unit::Farad, 1e-13, 0.1),
            PartKind::Inductor { henries, .. } => (henries, Unit::Henry, 1e-9, 1e3),
            _ => continue,
        };
        if !(low..=high).contains(&value) {
            let shown = format_engineering(value, unit.symbol(), 3);
            reader.caution_on_line(
                part.line,
                format!("{} is {shown}, an unusual size", part.name),
            );
        }
    }
}

fn note_idle_parts(reader: &mut Reader, file: &Fields, stage: &Stage) {
    let mut touched: HashSet<&str> = HashSet::from([stage.input.as_str(), stage.output.as_str()]);
    for part in &stage.parts {
        let terminals = part.terminals();
        if terminals
            .iter()
            .all(|terminal| terminal.node == terminals[0].node)
        {
            let message = format!(
                "{} has every terminal on node {} and does nothing",
                part.name, terminals[0].node
            );
            reader.caution_on_line(part.line, message);
        }
        touched.extend(terminals.iter().map(|terminal| terminal.node));
    }
    let rails = file.get("rails").and_then(|entry| entry.value.as_table());
    for rail in stage
        .rails
        .iter()
        .filter(|rail| !touched.contains(rail.name.as_str()))
    {
        let at = rails
            .and_then(|rails| rails.get_key_value(rail.name.as_str()))
            .map_or(0, |(key, _)| key.span().start);
        reader.caution(at, format!("rail {} feeds nothing", rail.name));
    }
}
