//! Where an override of a part lands: its value, its condition, its device and the parameters of that.

use super::description::{Condition, Part, PartKind, Stage, TrackLaw};
use super::devices::{Device, Parameters, Role};
use super::names;
use super::overrides::{Override, OverrideError};
use super::sections::rating_keys;
use super::settings::{Outcome, device_name, held, no_such_key, quantity};
use crate::device::classes;
use crate::device::keys::{DIODE, Key, Range, TRANSISTOR};
use crate::device::{Polarity, Ratings};
use crate::quantity::{Unit, quoted, ratio};

/// The device a part is to be given, where the override names one.
pub(super) fn devices_of(
    stage: &Stage,
    index: usize,
    change: &Override,
    key: Option<&str>,
) -> Result<Option<Device>, OverrideError> {
    let part = &stage.parts[index];
    let Some((role, word, what)) = role(part) else {
        return Ok(None);
    };
    let is_condition = matches!(change.value.as_str(), "open" | "short" | "fitted");
    if !(key.is_none() && !is_condition || key == Some(word)) {
        return Ok(None);
    }
    let name = change.value.as_str();
    let device = classes_in_use(stage, name).or_else(|| classes::find(name).map(Device::built_in));
    let Some(device) = device else {
        let own = stage.parts.iter().filter_map(device_name);
        let hint = names::hint(
            name,
            own.chain(classes::all().iter().map(|class| class.name.as_str())),
        );
        return Err(change.unknown(format!("unknown device {}{hint}", quoted(name))));
    };
    match device.serves(role) {
        Ok(()) => Ok(Some(device)),
        Err(found) => Err(change.unsuitable(format!(
            "{} is {found}, {} needs {what}",
            quoted(name),
            part.name
        ))),
    }
}

fn role(part: &Part) -> Option<(Role, &'static str, &'static str)> {
    match &part.kind {
        PartKind::Diode { .. } => Some((Role::Diode, "diode", "a diode")),
        PartKind::Transistor {
            polarity: Polarity::Npn,
            ..
        } => Some((Role::Npn, "npn", "an NPN transistor")),
        PartKind::Transistor {
            polarity: Polarity::Pnp,
            ..
        } => Some((Role::Pnp, "pnp", "a PNP transistor")),
        _ => None,
    }
}

/// A class another part of the stage already has; the description keeps no unused class.
fn classes_in_use(stage: &Stage, name: &str) -> Option<Device> {
    let part = stage
        .parts
        .iter()
        .find(|part| device_name(part) == Some(name))?;
    match &part.kind {
        PartKind::Diode { parameters, .. } => Some(Device {
            parameters: Parameters::Diode(parameters.clone()),
            gain_range: None,
            ratings: part.ratings.clone(),
        }),
        PartKind::Transistor {
            polarity,
            parameters,
            gain_range,
            ..
        } => Some(Device {
            parameters: Parameters::Transistor(Some(*polarity), parameters.clone()),
            gain_range: *gain_range,
            ratings: part.ratings.clone(),
        }),
        _ => None,
    }
}

pub(super) fn set_part(
    part: &mut Part,
    change: &Override,
    key: Option<&str>,
    device: Option<Device>,
) -> Outcome {
    if let Some(device) = device {
        give_device(part, &change.value, device);
        return Ok(());
    }
    match (key, change.value.as_str()) {
        (None, "open") => part.condition = Condition::Open,
        (None, "fitted") => part.condition = Condition::Fitted,
        (None, "short") if part.terminals().len() == 2 => part.condition = Condition::Short,
        (None, "short") => {
            return Err(change.unsuitable("only a part with two terminals can be short"));
        }
        (None, _) => {
            let key = main_key(&part.kind);
            return set_key(part, change, key);
        }
        (Some(key), _) => return set_key(part, change, key),
    }
    Ok(())
}

fn give_device(part: &mut Part, name: &str, given: Device) {
    match (&mut part.kind, given.parameters) {
        (
            PartKind::Diode {
                device, parameters, ..
            },
            Parameters::Diode(set),
        ) => {
            (*device, *parameters) = (name.to_owned(), set);
        }
        (
            PartKind::Transistor {
                device,
                parameters,
                gain_range,
                ..
            },
            Parameters::Transistor(_, set),
        ) => {
            (*device, *parameters, *gain_range) = (name.to_owned(), set, given.gain_range);
        }
        _ => {}
    }
    part.ratings = given.ratings;
}

/// The key that carries the main value of a part.
fn main_key(kind: &PartKind) -> &'static str {
    match kind {
        PartKind::Resistor { .. } => "resistor",
        PartKind::Capacitor { .. } => "capacitor",
        PartKind::Inductor { .. } => "inductor",
        PartKind::Potentiometer { .. } => "potentiometer",
        PartKind::CurrentSource { .. } => "current",
        PartKind::Diode { .. } => "diode",
        PartKind::Transistor {
            polarity: Polarity::Npn,
            ..
        } => "npn",
        PartKind::Transistor {
            polarity: Polarity::Pnp,
            ..
        } => "pnp",
    }
}

fn set_key(part: &mut Part, change: &Override, key: &str) -> Outcome {
    if let Some(rating) = Key::find(rating_keys(&part.kind), key) {
        let value = quantity(change, rating.unit, rating.range)?;
        (rating.set)(&mut part.ratings, value);
        return Ok(());
    }
    match key {
        "tolerance" => {
            let value =
                ratio::parse_ratio(&change.value).map_err(|error| change.unsuitable(error))?;
            part.tolerance = Some(held(change, value, Unit::Plain, Range::BelowOne)?);
        }
        "tempco" => {
            part.tempco =
                ratio::parse_tempco(&change.value).map_err(|error| change.unsuitable(error))?
        }
        "fitted" if change.value == "true" => part.condition = Condition::Fitted,
        "fitted" if change.value == "false" => part.condition = Condition::Open,
        "fitted" => return Err(change.unsuitable("must be true or false")),
        _ => return set_value(part, change, key),
    }
    Ok(())
}

fn set_value(part: &mut Part, change: &Override, key: &str) -> Outcome {
    use Range::{Any, NotNegative, Positive};
    match (&mut part.kind, key) {
        (PartKind::Resistor { ohms, .. }, "resistor") => {
            *ohms = quantity(change, Unit::Ohm, Positive)?
        }
        (PartKind::Capacitor { farads, .. }, "capacitor") => {
            *farads = quantity(change, Unit::Farad, Positive)?
        }
        (
            PartKind::Capacitor {
                series_resistance, ..
            },
            "series_resistance",
        ) => {
            *series_resistance = quantity(change, Unit::Ohm, NotNegative)?;
        }
        (PartKind::Capacitor { leakage, .. }, "leakage") if change.value == "open" => {
            *leakage = None
        }
        (PartKind::Capacitor { leakage, .. }, "leakage") => {
            *leakage = Some(quantity(change, Unit::Ohm, Positive)?);
        }
        (PartKind::Inductor { henries, .. }, "inductor") => {
            *henries = quantity(change, Unit::Henry, Positive)?
        }
        (PartKind::Inductor { resistance, .. }, "resistance") => {
            *resistance = quantity(change, Unit::Ohm, NotNegative)?;
        }
        (PartKind::Potentiometer { ohms, .. }, "potentiometer") => {
            *ohms = quantity(change, Unit::Ohm, Positive)?
        }
        (PartKind::Potentiometer { turn, gang, .. }, "turn") => match gang {
            Some(leader) => {
                return Err(
                    change.unsuitable(format!("{} follows {leader}; set {leader}.turn", part.name))
                );
            }
            None => *turn = quantity(change, Unit::Plain, Range::ZeroToOne)?,
        },
        (PartKind::Potentiometer { law, .. }, "law") => {
            *law = TrackLaw::of_name(&change.value)
                .ok_or_else(|| change.unsuitable("law must be linear, audio or reverse-audio"))?;
        }
        (PartKind::CurrentSource { amperes, .. }, "current") => {
            *amperes = quantity(change, Unit::Ampere, Any)?
        }
        _ => return set_parameter(part, change, key),
    }
    Ok(())
}

/// A parameter of the device of a diode or a transistor.
pub(super) fn set_parameter(part: &mut Part, change: &Override, key: &str) -> Outcome {
    let known = match &mut part.kind {
        PartKind::Diode { parameters, .. } => {
            if let Some(found) = Key::find(DIODE, key) {
                (found.set)(parameters, quantity(change, found.unit, found.range)?);
                return Ok(());
            }
            DIODE.iter().map(|key| key.name).collect()
        }
        PartKind::Transistor { parameters, .. } => {
            if let Some(found) = Key::find(TRANSISTOR, key) {
                (found.set)(parameters, quantity(change, found.unit, found.range)?);
                return Ok(());
            }
            TRANSISTOR.iter().map(|key| key.name).collect()
        }
        _ => Vec::new(),
    };
    Err(no_such_key(
        change,
        &part.name,
        key,
        &known_keys(part, known),
    ))
}

/// Every key an override may set on a part, for hints.
fn known_keys(part: &Part, parameters: Vec<&'static str>) -> Vec<&'static str> {
    let own: &[&str] = match part.kind {
        PartKind::Resistor { .. } | PartKind::CurrentSource { .. } => &["tolerance", "tempco"],
        PartKind::Capacitor { .. } => &["series_resistance", "leakage", "tolerance", "tempco"],
        PartKind::Inductor { .. } => &["resistance", "tolerance", "tempco"],
        PartKind::Potentiometer { .. } => &["turn", "law", "tolerance", "tempco"],
        PartKind::Diode { .. } | PartKind::Transistor { .. } => &[],
    };
    let ratings = rating_keys(&part.kind)
        .iter()
        .map(|key: &Key<Ratings>| key.name);
    let main = main_key(&part.kind);
    [main]
        .into_iter()
        .chain(own.iter().copied())
        .chain(["fitted"])
        .chain(ratings)
        .chain(parameters)
        .collect()
}
