//! `[parts]`: every kind of part, its value, terminals and extras.

use std::collections::HashMap;

use super::description::{Condition, Part, PartKind, TrackLaw};
use super::devices::{Device, Devices, Parameters, Role};
use super::names;
use super::table::{Entry, Fields, Given, Reader};
use crate::device::keys::{CAPACITOR_RATINGS, Key, RESISTOR_RATINGS, Range};
use crate::device::{DiodeParameters, Polarity, Ratings, TransistorParameters};
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
        "resistor" => resistor(reader, fields),
        "capacitor" => capacitor(reader, fields),
        "inductor" => inductor(reader, fields),
        "potentiometer" => potentiometer(reader, fields),
        "current" => current_source(reader, fields),
        "diode" => diode(reader, fields, devices, &mut ratings),
        _ => transistor(reader, fields, devices, kind_key, &mut ratings),
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

fn resistor(reader: &mut Reader, fields: &Fields) -> Option<PartKind> {
    let ohms = fields.required(reader, "resistor", Unit::Ohm, Range::Positive);
    Some(PartKind::Resistor {
        ohms,
        pins: pins(reader, fields)?,
    })
}

fn capacitor(reader: &mut Reader, fields: &Fields) -> Option<PartKind> {
    let farads = fields.required(reader, "capacitor", Unit::Farad, Range::Positive);
    let series_resistance = fields
        .quantity(reader, "series_resistance", Unit::Ohm, Range::NotNegative)
        .unwrap_or(0.0);
    let leakage = fields
        .quantity(reader, "leakage", Unit::Ohm, Range::Positive)
        .value();
    let polarised = fields.has("plus") || fields.has("minus");
    let pins = if polarised {
        plus_and_minus(reader, fields)?
    } else {
        pins(reader, fields)?
    };
    Some(PartKind::Capacitor {
        farads,
        pins,
        polarised,
        series_resistance,
        leakage,
    })
}

fn plus_and_minus(reader: &mut Reader, fields: &Fields) -> Option<[String; 2]> {
    if let Some(entry) = fields.get("pins") {
        reader.connection_fault(entry.key_at, || {
            format!("{}has pins beside plus and minus; plus and minus mark a polarised part, pins one that is not", fields.prefix())
        });
        return None;
    }
    let (plus, minus) = (fields.node(reader, "plus"), fields.node(reader, "minus"));
    Some([plus?, minus?])
}

fn inductor(reader: &mut Reader, fields: &Fields) -> Option<PartKind> {
    let henries = fields.required(reader, "inductor", Unit::Henry, Range::Positive);
    let resistance = fields
        .quantity(reader, "resistance", Unit::Ohm, Range::NotNegative)
        .unwrap_or(0.0);
    Some(PartKind::Inductor {
        henries,
        pins: pins(reader, fields)?,
        resistance,
    })
}

fn potentiometer(reader: &mut Reader, fields: &Fields) -> Option<PartKind> {
    let ohms = fields.required(reader, "potentiometer", Unit::Ohm, Range::Positive);
    let turn = fields.quantity(reader, "turn", Unit::Plain, Range::ZeroToOne);
    let gang = fields
        .string(reader, "gang")
        .value()
        .map(|(name, _)| name.to_owned());
    if turn == Given::Missing && gang.is_none() && !fields.misspells("turn") {
        reader.fault(fields.at, || {
            format!(
                "{}turn is missing; needs 0 (anticlockwise) to 1, or gang",
                fields.prefix()
            )
        });
    }
    if let (Some(entry), true) = (fields.get("turn"), gang.is_some()) {
        reader.fault(entry.key_at, || {
            format!(
                "{}has both turn and gang; a ganged track follows the other",
                fields.prefix()
            )
        });
    }
    let law = law(reader, fields);
    let clockwise = fields.node(reader, "clockwise");
    let wiper = fields.node(reader, "wiper");
    let anticlockwise = fields.node(reader, "anticlockwise");
    Some(PartKind::Potentiometer {
        ohms,
        clockwise: clockwise?,
        wiper: wiper?,
        anticlockwise: anticlockwise?,
        turn: turn.unwrap_or(0.5),
        law,
        gang,
    })
}

fn law(reader: &mut Reader, fields: &Fields) -> TrackLaw {
    let Given::Value((name, at)) = fields.string(reader, "law") else {
        return TrackLaw::Linear;
    };
    TrackLaw::of_name(name).unwrap_or_else(|| {
        reader.fault(at, || {
            format!(
                "{}law is {}, must be linear, audio or reverse-audio",
                fields.prefix(),
                quoted(name)
            )
        });
        TrackLaw::Linear
    })
}

fn current_source(reader: &mut Reader, fields: &Fields) -> Option<PartKind> {
    let amperes = fields.required(reader, "current", Unit::Ampere, Range::Any);
    let (from, to) = (fields.node(reader, "from"), fields.node(reader, "to"));
    Some(PartKind::CurrentSource {
        amperes,
        from: from?,
        to: to?,
    })
}

/// The class a part names, with that name.
fn device(
    reader: &mut Reader,
    fields: &Fields,
    devices: &Devices,
    key: &str,
) -> (String, Option<Device>) {
    let Given::Value((name, at)) = fields.string(reader, key) else {
        return (String::new(), None);
    };
    let found =
        Role::of_key(key).and_then(|role| devices.find(reader, &fields.owner, name, role, at));
    (name.to_owned(), found)
}

fn diode(
    reader: &mut Reader,
    fields: &Fields,
    devices: &Devices,
    ratings: &mut Ratings,
) -> Option<PartKind> {
    let (name, device) = device(reader, fields, devices, "diode");
    let mut parameters = Box::new(DiodeParameters::exponential(1.0));
    if let Some(device) = device
        && let Parameters::Diode(set) = device.parameters
    {
        parameters = set;
        *ratings = device.ratings;
    }
    let (anode, cathode) = (fields.node(reader, "anode"), fields.node(reader, "cathode"));
    Some(PartKind::Diode {
        device: name,
        parameters,
        anode: anode?,
        cathode: cathode?,
    })
}

fn transistor(
    reader: &mut Reader,
    fields: &Fields,
    devices: &Devices,
    key: &str,
    ratings: &mut Ratings,
) -> Option<PartKind> {
    let (name, device) = device(reader, fields, devices, key);
    let mut parameters = Box::new(TransistorParameters::exponential(1.0, 1.0));
    let mut gain_range = None;
    if let Some(device) = device
        && let Parameters::Transistor(_, set) = device.parameters
    {
        parameters = set;
        gain_range = device.gain_range;
        *ratings = device.ratings;
    }
    let polarity = if key == "npn" {
        Polarity::Npn
    } else {
        Polarity::Pnp
    };
    let collector = fields.node(reader, "collector");
    let base = fields.node(reader, "base");
    let emitter = fields.node(reader, "emitter");
    Some(PartKind::Transistor {
        polarity,
        device: name,
        parameters,
        gain_range,
        collector: collector?,
        base: base?,
        emitter: emitter?,
    })
}

fn pins(reader: &mut Reader, fields: &Fields) -> Option<[String; 2]> {
    let Some(entry) = fields.get("pins") else {
        reader.connections_known = false;
        if fields.misspells("pins") {
            return None;
        }
        reader.fault(fields.at, || {
            format!(
                "{}pins is missing; needs two node names such as [\"in\", \"base\"]",
                fields.prefix()
            )
        });
        return None;
    };
    let names: Vec<_> = entry.elements().unwrap_or_default();
    if names.len() != 2 || names.iter().any(|name| name.value.as_str().is_none()) {
        reader.connection_fault(entry.at, || {
            format!(
                "{}pins must be two node names in quotes such as [\"in\", \"base\"]",
                fields.prefix()
            )
        });
        return None;
    }
    let mut node = |index: usize| {
        let pin: &Entry = &names[index];
        fields.node_name(
            reader,
            "pins",
            pin.value.as_str().unwrap_or_default(),
            pin.at,
        )
    };
    let (first, second) = (node(0), node(1));
    Some([first?, second?])
}
