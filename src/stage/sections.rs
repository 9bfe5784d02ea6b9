//! `[source]`, `[load]`, `[rails]`, `[nominal]`, `[ratings]` and `[targets]`.

use std::collections::{HashMap, HashSet};

use super::description::{Load, Part, PartKind, Rail, Source, Target, TargetEntry};
use super::names;
use super::table::{Entry, Fields, Given, Reader};
use crate::device::Ratings;
use crate::device::keys::{
    CAPACITOR_RATINGS, DIODE_RATINGS, Key, RESISTOR_RATINGS, Range, TRANSISTOR_RATINGS,
};
use crate::quantity::{Element, Frequency, Level, Unit, ValueError, engineering, quoted, ratio};

/// `[source]`; an ideal EMF where the file has none.
pub(super) fn source(reader: &mut Reader, section: Option<&Entry>) -> Source {
    let mut source = Source {
        resistance: 0.0,
        inductance: 0.0,
        capacitance: 0.0,
        stated: section.is_some(),
    };
    let Some(fields) = section.and_then(|entry| Fields::of(reader, "[source]", entry)) else {
        return source;
    };
    fields.refuse_unknown(reader, &["resistance", "inductance", "capacitance"]);
    source.resistance = fields
        .quantity(reader, "resistance", Unit::Ohm, Range::NotNegative)
        .unwrap_or(0.0);
    source.inductance = fields
        .quantity(reader, "inductance", Unit::Henry, Range::NotNegative)
        .unwrap_or(0.0);
    source.capacitance = fields
        .quantity(reader, "capacitance", Unit::Farad, Range::NotNegative)
        .unwrap_or(0.0);
    source
}

/// `[load]`; none where the file has none.
pub(super) fn load(reader: &mut Reader, section: Option<&Entry>) -> Load {
    let mut load = Load {
        resistance: None,
        capacitance: 0.0,
        stated: section.is_some(),
    };
    let Some(fields) = section.and_then(|entry| Fields::of(reader, "[load]", entry)) else {
        return load;
    };
    fields.refuse_unknown(reader, &["resistance", "capacitance"]);
    load.resistance = fields
        .quantity(reader, "resistance", Unit::Ohm, Range::Positive)
        .value();
    load.capacitance = fields
        .quantity(reader, "capacitance", Unit::Farad, Range::NotNegative)
        .unwrap_or(0.0);
    load
}

/// `[rails]`, in file order.
pub(super) fn rails(reader: &mut Reader, section: Option<&Entry>) -> Vec<Rail> {
    let Some(fields) = section.and_then(|entry| Fields::of(reader, "[rails]", entry)) else {
        return Vec::new();
    };
    let mut rails = Vec::new();
    for entry in &fields.entries {
        if let Err(error) = names::check_designator(entry.key) {
            reader.fault(entry.key_at, || format!("[rails]: {error}"));
        }
        rails.push(rail(reader, &fields, entry));
    }
    rails
}

fn rail(reader: &mut Reader, rails: &Fields, entry: &Entry) -> Rail {
    let mut rail = Rail {
        name: entry.key.to_owned(),
        volts: 0.0,
        resistance: 0.0,
        rise: 0.0,
        ripple: 0.0,
        ripple_frequency: 100.0,
    };
    if !entry.is_table() {
        rail.volts = rails
            .quantity(reader, entry.key, Unit::Volt, Range::Any)
            .unwrap_or(0.0);
        return rail;
    }
    let Some(fields) = Fields::of(reader, entry.key, entry) else {
        return rail;
    };
    fields.refuse_unknown(
        reader,
        &["volts", "resistance", "rise", "ripple", "ripple_frequency"],
    );
    rail.volts = fields.required(reader, "volts", Unit::Volt, Range::Any);
    rail.resistance = fields
        .quantity(reader, "resistance", Unit::Ohm, Range::NotNegative)
        .unwrap_or(0.0);
    rail.rise = fields
        .quantity(reader, "rise", Unit::Second, Range::NotNegative)
        .unwrap_or(0.0);
    rail.ripple = fields
        .parsed(reader, "ripple", Level::parse)
        .value()
        .map_or(0.0, |level| level.rms);
    let frequency = fields.quantity(reader, "ripple_frequency", Unit::Hertz, Range::Positive);
    rail.ripple_frequency = frequency.unwrap_or(rail.ripple_frequency);
    rail
}

/// `[nominal] input`, V rms.
pub(super) fn nominal(reader: &mut Reader, section: Option<&Entry>) -> Option<f64> {
    let fields = Fields::of(reader, "[nominal]", section?)?;
    fields.refuse_unknown(reader, &["input"]);
    match fields.parsed(reader, "input", Level::parse) {
        Given::Value(level) if level.rms > 0.0 => Some(level.rms),
        Given::Value(_) => {
            let at = fields.get("input").map_or(fields.at, |entry| entry.at);
            reader.fault(at, || "[nominal]: input must be above 0 V".to_owned());
            None
        }
        Given::Missing | Given::Faulty => None,
    }
}

/// `[ratings.NAME]`, put over what the part has from its device. `names` are those of every part, faulty ones too.
pub(super) fn ratings(
    reader: &mut Reader,
    section: Option<&Entry>,
    names: &[&str],
    parts: &mut [Part],
) {
    let Some(fields) = section.and_then(|entry| Fields::of(reader, "[ratings]", entry)) else {
        return;
    };
    let known: HashSet<&str> = names.iter().copied().collect();
    let index: HashMap<String, usize> = parts
        .iter()
        .enumerate()
        .map(|(i, part)| (part.name.clone(), i))
        .collect();
    for entry in &fields.entries {
        if !known.contains(entry.key) {
            reader.fault(entry.key_at, || {
                let hint = names::hint(entry.key, known.iter().copied());
                format!("[ratings]: no part {}{hint}", quoted(entry.key))
            });
        }
        let Some(part) = index.get(entry.key) else {
            continue;
        };
        let owner = format!("[ratings.{}]", entry.key);
        let Some(given) = Fields::of(reader, owner, entry) else {
            continue;
        };
        let keys = rating_keys(&parts[*part].kind);
        let known: Vec<&str> = keys.iter().map(|key| key.name).collect();
        given.refuse_unknown(reader, &known);
        given.fill(reader, &mut parts[*part].ratings, keys);
    }
}

/// The ratings a kind of part can have.
pub(super) fn rating_keys(kind: &PartKind) -> &'static [Key<Ratings>] {
    match kind {
        PartKind::Resistor { .. } | PartKind::Potentiometer { .. } => RESISTOR_RATINGS,
        PartKind::Capacitor { .. } => CAPACITOR_RATINGS,
        PartKind::Diode { .. } => DIODE_RATINGS,
        PartKind::Transistor { .. } => TRANSISTOR_RATINGS,
        PartKind::Inductor { .. } | PartKind::CurrentSource { .. } => &[],
    }
}

/// The targets there are, with the entries each knows.
const TARGETS: [(&str, &[&str]); 2] = [
    ("gain", &["at", "min", "max"]),
    ("clean_input", &["thd", "at", "from", "to", "min", "max"]),
];

/// `[targets]`, in file order.
pub(super) fn targets(reader: &mut Reader, section: Option<&Entry>) -> Vec<Target> {
    let Some(fields) = section.and_then(|entry| Fields::of(reader, "[targets]", entry)) else {
        return Vec::new();
    };
    fields.refuse_unknown(reader, &TARGETS.map(|(name, _)| name));
    let mut targets = Vec::new();
    for entry in &fields.entries {
        let Some((name, known)) = TARGETS.iter().find(|(name, _)| *name == entry.key) else {
            continue;
        };
        let Some(given) = Fields::of(reader, format!("[targets]: {name}"), entry) else {
            continue;
        };
        given.refuse_unknown(reader, known);
        let entries = given
            .entries
            .iter()
            .filter(|entry| known.contains(&entry.key));
        let entries = entries
            .filter_map(|entry| target_entry(reader, &given, name, entry))
            .collect();
        targets.push(Target {
            name: (*name).to_owned(),
            entries,
        });
    }
    targets
}

fn target_entry(
    reader: &mut Reader,
    fields: &Fields,
    target: &str,
    entry: &Entry,
) -> Option<TargetEntry> {
    let value = fields
        .parsed(reader, entry.key, |text| {
            target_value(target, entry.key, text)
        })
        .value()?;
    Some(TargetEntry {
        key: entry.key.to_owned(),
        text: entry.text()?.into_owned(),
        value,
    })
}

/// The value of one entry of a target in base units: Hz, a ratio for THD, V rms for a level, dB for a gain.
pub(super) fn target_value(target: &str, key: &str, text: &str) -> Result<f64, ValueError> {
    match (target, key) {
        (_, "at" | "from" | "to") => Frequency::parse(text).map(|frequency| frequency.hertz),
        (_, "thd") => ratio::parse_percent(text),
        ("gain", _) => {
            let number = text.trim().strip_suffix("dB").unwrap_or(text);
            engineering::parse(number, Unit::Plain).map_err(|_| ValueError::NotANumber {
                found: text.to_owned(),
                wanted: "a gain such as 33dB",
            })
        }
        _ => Level::parse(text).map(|level| level.rms),
    }
}
