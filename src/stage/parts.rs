//! `[parts]`: what each part is, and the extras all kinds share.

use std::collections::HashMap;

use super::description::{Condition, Part};
use super::devices::{Devices, Role};
use super::table::{Entry, Fields, Reader};
use super::{kinds, names};
use crate::device::Ratings;
use crate::device::keys::{CAPACITOR_RATINGS, Key, RESISTOR_RATINGS, Range};
use crate::quantity::{Unit, quoted, ratio};

/// The keys that say what a part is, each with the further keys its kind knows.
const KINDS: [(&str, &[&str]); 8] = [
    ("resistor", &["pins", "watts", "tolerance", "tempco"]),
    (
        "capacitor",
        &[
            "pins",
            "plus",
            "minus",
            "series_resistance",
            "leakage",
            "volts",
            "tolerance",
            "tempco",
        ],
    ),
    ("inductor", &["pins", "resistance", "tolerance", "tempco"]),
    (
        "potentiometer",
        &[
            "clockwise",
            "wiper",
            "anticlockwise",
            "turn",
            "law",
            "gang",
            "watts",
            "tolerance",
            "tempco",
        ],
    ),
    ("diode", &["anode", "cathode"]),
    ("npn", &["collector", "base", "emitter"]),
    ("pnp", &["collector", "base", "emitter"]),
    ("current", &["from", "to", "tolerance", "tempco"]),
];

/// Keys every part knows.
const COMMON: [&str; 2] = ["fitted", "match"];

/// Reads all of `[parts]`.
pub(super) fn read(reader: &mut Reader, section: &Fields, devices: &Devices) -> Vec<Part> {
    let mut parts = Vec::new();
    for entry in &section.entries {
        if let Err(error) = names::check_designator(entry.key) {
            reader.fault(entry.key_at, || format!("[parts]: {error}"));
        }
        let owner = shown(entry.key);
        match Fields::of(reader, owner, entry)
            .and_then(|fields| part(reader, entry, &fields, devices))
        {
            Some(part) => parts.push(part),
            None => reader.connections_known = false,
        }
    }
    parts
}

/// How the parts use each device class: the first use of each.
pub(super) fn device_uses(section: Option<&Entry>) -> HashMap<String, Role> {
    let mut uses = HashMap::new();
    let Some(parts) = section.and_then(|entry| entry.value.as_table()) else {
        return uses;
    };
    for entry in &Fields::new("", 0, parts).entries {
        let Some(part) = entry.value.as_table() else {
            continue;
        };
        for (key, value) in part {
            if let (Some(role), Some(device)) =
                (Role::of_key(key.get_ref()), value.get_ref().as_str())
            {
                uses.entry(device.to_owned()).or_insert(role);
            }
        }
    }
    uses
}

/// A part's name as a message begins with it.
fn shown(name: &str) -> String {
    if names::check(name).is_ok() {
        name.to_owned()
    } else {
        quoted(name)
    }
}

fn part(reader: &mut Reader, entry: &Entry, fields: &Fields, devices: &Devices) -> Option<Part> {
    let kind_key = kind_key(reader, fields)?;
    let known: Vec<&str> = KINDS
        .iter()
        .filter(|(key, _)| *key == kind_key)
        .flat_map(|(key, more)| more.iter().chain([key]))
        .copied()
        .collect();
    let known: Vec<&str> = known.into_iter().chain(COMMON).collect();
    fields.refuse_unknown(reader, &known);

    let mut ratings = Ratings::default();
    let kind = match kind_key {
        "resistor" => kinds::resistor(reader, fields),
        "capacitor" => kinds::capacitor(reader, fields),
        "inductor" => kinds::inductor(reader, fields),
        "potentiometer" => kinds::potentiometer(reader, fields),
        "current" => kinds::current_source(reader, fields),
        "diode" => kinds::diode(reader, fields, devices, &mut ratings),
        _ => kinds::transistor(reader, fields, devices, kind_key, &mut ratings),
    };
    if let Some(keys) = rating_keys(kind_key) {
        fields.fill(reader, &mut ratings, keys);
    }
    let tolerance = tolerance(reader, fields);
    let tempco = fields
        .parsed(reader, "tempco", ratio::parse_tempco)
        .unwrap_or(0.0);
    let fitted = fields.boolean(reader, "fitted").unwrap_or(true);
    let matched = fields
        .string(reader, "match")
        .value()
        .map(|(group, _)| group.to_owned());
    Some(Part {
        name: entry.key.to_owned(),
        kind: kind?,
        tolerance,
        tempco,
        ratings,
        condition: if fitted {
            Condition::Fitted
        } else {
            Condition::Open
        },
        matched,
        line: reader.lines.line(entry.key_at),
    })
}

/// The ratings that stand in the part itself.
fn rating_keys(kind: &str) -> Option<&'static [Key<Ratings>]> {
    match kind {
        "resistor" | "potentiometer" => Some(RESISTOR_RATINGS),
        "capacitor" => Some(CAPACITOR_RATINGS),
        _ => None,
    }
}

/// The one key that says what the part is.
fn kind_key(reader: &mut Reader, fields: &Fields) -> Option<&'static str> {
    let given: Vec<&'static str> = KINDS
        .iter()
        .map(|(key, _)| *key)
        .filter(|key| fields.has(key))
        .collect();
    match given[..] {
        [one] => Some(one),
        [] => {
            reader.fault(fields.at, || {
                let near = fields
                    .entries
                    .iter()
                    .find_map(|e| names::nearest(e.key, KINDS.map(|(key, _)| key)));
                let hint = near.map_or_else(
                    || format!("needs one of {}", KINDS.map(|(key, _)| key).join(", ")),
                    |near| format!("did you mean {near}?"),
                );
                format!("{}says not what it is; {hint}", fields.prefix())
            });
            None
        }
        [first, second, ..] => {
            let at = fields.get(second).map_or(fields.at, |entry| entry.key_at);
            reader.fault(at, || {
                format!("{}is both {first} and {second}; keep one", fields.prefix())
            });
            None
        }
    }
}

fn tolerance(reader: &mut Reader, fields: &Fields) -> Option<f64> {
    let given = fields.in_range(
        reader,
        "tolerance",
        Unit::Plain,
        Range::NotNegative,
        ratio::parse_ratio,
    );
    let value = given.value()?;
    if value >= 1.0 {
        let at = fields.get("tolerance").map_or(fields.at, |entry| entry.at);
        reader.fault(at, || {
            format!(
                "{}tolerance is {} %, must be below 100 %; write 5 percent as \"5%\"",
                fields.prefix(),
                100.0 * value
            )
        });
    }
    Some(value)
}
