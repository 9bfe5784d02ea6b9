//! Where an override lands: every value of the description by its name.

use super::description::{Part, PartKind, Rail, Stage};
use super::overrides::{Override, OverrideError};
use super::part_settings::{devices_of, set_parameter, set_part};
use super::sections::target_value;
use super::{gang, names};
use crate::device::keys::Range;
use crate::quantity::{Element, Level, Unit, engineering, parse_temperature, quoted};

pub(super) type Outcome = Result<(), OverrideError>;

/// Changes the value that `change` names.
pub(super) fn apply(stage: &mut Stage, change: &Override) -> Outcome {
    let path: Vec<&str> = change.path.iter().map(String::as_str).collect();
    match path[..] {
        ["title"] => stage.title = change.value.clone(),
        ["input"] => stage.input = node(change)?,
        ["output"] => stage.output = node(change)?,
        ["temperature"] => {
            stage.temperature =
                parse_temperature(&change.value).map_err(|e| change.unsuitable(e))?
        }
        ["nominal", "input"] => stage.nominal_input = Some(level(change, Range::Positive)?),
        ["source", key] => source(stage, change, key)?,
        ["load"] if change.value == "open" => {
            (stage.load.resistance, stage.load.capacitance) = (None, 0.0)
        }
        ["load", key] => load(stage, change, key)?,
        ["targets", target, key] => set_target(stage, change, target, key)?,
        [section @ ("source" | "load" | "nominal" | "targets")] => {
            return Err(change.unsuitable(format!(
                "name one of its values, such as {section}.KEY=VALUE"
            )));
        }
        [name] | [name, _] => named(stage, change, name, path.get(1).copied())?,
        _ => {
            return Err(change.unknown(format!(
                "the stage has no {}",
                quoted(&change.path.join("."))
            )));
        }
    }
    Ok(())
}

/// A part, a rail, or every part of a device class.
fn named(stage: &mut Stage, change: &Override, name: &str, key: Option<&str>) -> Outcome {
    if let Some(rail) = stage.rails.iter_mut().find(|rail| rail.name == name) {
        return set_rail(rail, change, key.unwrap_or("volts"));
    }
    if let Some(index) = stage.parts.iter().position(|part| part.name == name) {
        let known = devices_of(stage, index, change, key)?;
        set_part(&mut stage.parts[index], change, key, known)?;
        // The stage was read without a fault in its gangs.
        gang::propagate(&mut stage.parts);
        return Ok(());
    }
    set_class(stage, change, name, key)
}

fn set_class(stage: &mut Stage, change: &Override, name: &str, key: Option<&str>) -> Outcome {
    let mut found = false;
    for part in stage
        .parts
        .iter_mut()
        .filter(|part| device_name(part) == Some(name))
    {
        found = true;
        let key = key.ok_or_else(|| change.unsuitable(format!("write {name}.PARAMETER=VALUE")))?;
        set_parameter(part, change, key)?;
    }
    if found {
        return Ok(());
    }
    let sections = [
        "source",
        "load",
        "temperature",
        "nominal",
        "targets",
        "input",
        "output",
        "title",
    ];
    let parts = stage.parts.iter().map(|part| part.name.as_str());
    let rails = stage.rails.iter().map(|rail| rail.name.as_str());
    let classes = stage.parts.iter().filter_map(device_name);
    let hint = names::hint(name, parts.chain(rails).chain(sections).chain(classes));
    Err(change.unknown(format!("the stage has no {}{hint}", quoted(name))))
}

pub(super) fn device_name(part: &Part) -> Option<&str> {
    match &part.kind {
        PartKind::Diode { device, .. } | PartKind::Transistor { device, .. } => Some(device),
        _ => None,
    }
}

fn node(change: &Override) -> Result<String, OverrideError> {
    names::check(&change.value)
        .map(|()| change.value.clone())
        .map_err(|error| change.unsuitable(error))
}

pub(super) fn quantity(change: &Override, unit: Unit, range: Range) -> Result<f64, OverrideError> {
    let value =
        engineering::parse(&change.value, unit).map_err(|error| change.unsuitable(error))?;
    held(change, value, unit, range)
}

pub(super) fn held(
    change: &Override,
    value: f64,
    unit: Unit,
    range: Range,
) -> Result<f64, OverrideError> {
    if range.holds(value) {
        Ok(value)
    } else {
        Err(change.unsuitable(range.demand(unit)))
    }
}

fn level(change: &Override, range: Range) -> Result<f64, OverrideError> {
    let level = Level::parse(&change.value).map_err(|error| change.unsuitable(error))?;
    held(change, level.rms, Unit::Volt, range)
}

pub(super) fn no_such_key(
    change: &Override,
    owner: &str,
    key: &str,
    known: &[&str],
) -> OverrideError {
    let hint = names::hint(key, known.iter().copied());
    let hint = if hint.is_empty() {
        format!("; it has {}", known.join(", "))
    } else {
        hint
    };
    change.unknown(format!("{owner} has no {}{hint}", quoted(key)))
}

fn source(stage: &mut Stage, change: &Override, key: &str) -> Outcome {
    let source = &mut stage.source;
    match key {
        "resistance" => source.resistance = quantity(change, Unit::Ohm, Range::NotNegative)?,
        "inductance" => source.inductance = quantity(change, Unit::Henry, Range::NotNegative)?,
        "capacitance" => source.capacitance = quantity(change, Unit::Farad, Range::NotNegative)?,
        _ => {
            return Err(no_such_key(
                change,
                "source",
                key,
                &["resistance", "inductance", "capacitance"],
            ));
        }
    }
    source.stated = true;
    Ok(())
}

fn load(stage: &mut Stage, change: &Override, key: &str) -> Outcome {
    let load = &mut stage.load;
    match key {
        "resistance" if change.value == "open" => load.resistance = None,
        "resistance" => load.resistance = Some(quantity(change, Unit::Ohm, Range::Positive)?),
        "capacitance" => load.capacitance = quantity(change, Unit::Farad, Range::NotNegative)?,
        _ => {
            return Err(no_such_key(
                change,
                "load",
                key,
                &["resistance", "capacitance"],
            ));
        }
    }
    load.stated = true;
    Ok(())
}

fn set_target(stage: &mut Stage, change: &Override, target: &str, key: &str) -> Outcome {
    let entry = stage
        .targets
        .iter_mut()
        .filter(|known| known.name == target)
        .flat_map(|known| &mut known.entries)
        .find(|entry| entry.key == key);
    let Some(entry) = entry else {
        return Err(change.unknown(format!(
            "the file states no target {}",
            quoted(&format!("{target}.{key}"))
        )));
    };
    entry.value =
        target_value(target, key, &change.value).map_err(|error| change.unsuitable(error))?;
    entry.text = change.value.clone();
    Ok(())
}

fn set_rail(rail: &mut Rail, change: &Override, key: &str) -> Outcome {
    match key {
        "volts" => rail.volts = quantity(change, Unit::Volt, Range::Any)?,
        "resistance" => rail.resistance = quantity(change, Unit::Ohm, Range::NotNegative)?,
        "rise" => rail.rise = quantity(change, Unit::Second, Range::NotNegative)?,
        "ripple" => rail.ripple = level(change, Range::NotNegative)?,
        "ripple_frequency" => {
            rail.ripple_frequency = quantity(change, Unit::Hertz, Range::Positive)?
        }
        _ => {
            let known = ["volts", "resistance", "rise", "ripple", "ripple_frequency"];
            return Err(no_such_key(change, &rail.name, key, &known));
        }
    }
    Ok(())
}
