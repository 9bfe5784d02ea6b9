//! Every kind of part: its value and its terminals.

use super::description::{PartKind, TrackLaw};
use super::devices::{Device, Devices, Parameters, Role};
use super::table::{Entry, Fields, Given, Reader};
use crate::device::keys::Range;
use crate::device::{DiodeParameters, Polarity, Ratings, TransistorParameters};
use crate::quantity::{Unit, quoted};

pub(super) fn resistor(reader: &mut Reader, fields: &Fields) -> Option<PartKind> {
    let ohms = fields.required(reader, "resistor", Unit::Ohm, Range::Positive);
    Some(PartKind::Resistor {
        ohms,
        pins: pins(reader, fields)?,
    })
}

pub(super) fn capacitor(reader: &mut Reader, fields: &Fields) -> Option<PartKind> {
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

pub(super) fn inductor(reader: &mut Reader, fields: &Fields) -> Option<PartKind> {
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

pub(super) fn potentiometer(reader: &mut Reader, fields: &Fields) -> Option<PartKind> {
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

pub(super) fn current_source(reader: &mut Reader, fields: &Fields) -> Option<PartKind> {
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

pub(super) fn diode(
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

pub(super) fn transistor(
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
