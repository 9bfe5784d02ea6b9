//! One table of `[devices]`: its kind, the class it is `like`, its own parameters.

use std::collections::HashMap;

use super::devices::{Device, Parameters, Role};
use super::names;
use super::table::{Fields, Given, Reader};
use crate::device::Ratings;
use crate::device::classes;
use crate::device::keys::{DIODE, DIODE_RATINGS, Key, TRANSISTOR, TRANSISTOR_RATINGS};
use crate::quantity::{Unit, engineering, quoted};

pub(super) type Tables<'a, 't> = HashMap<&'a str, Fields<'a, 't>>;

/// The tables of `[devices]` by name.
pub(super) fn tables<'a, 't>(reader: &mut Reader, section: &Fields<'a, 't>) -> Tables<'a, 't> {
    let mut tables = HashMap::new();
    for entry in &section.entries {
        if let Err(error) = names::check(entry.key) {
            reader.fault(entry.key_at, || format!("[devices]: {error}"));
        }
        if classes::find(entry.key).is_some() {
            reader.caution(
                entry.key_at,
                format!(
                    "[devices.{}] takes the place of the built-in class",
                    entry.key
                ),
            );
        }
        let owner = format!("[devices.{}]", shown(entry.key));
        if let Some(fields) = Fields::of(reader, owner, entry) {
            tables.insert(entry.key, fields);
        }
    }
    tables
}

/// A device name as it stands in a table header.
fn shown(name: &str) -> String {
    if names::check(name).is_ok() {
        name.to_owned()
    } else {
        quoted(name)
    }
}

/// The name after `like`, where there is one.
fn like<'a>(fields: &Fields<'a, '_>) -> Option<&'a str> {
    fields.get("like")?.value.as_str()
}

/// Of the classes that start from nothing, which are diodes: by the parts that use them or what is derived from them,
/// and for those nobody uses by their keys.
pub(super) fn diodes(
    section: &Fields,
    tables: &Tables,
    uses: &HashMap<String, Role>,
) -> HashMap<String, bool> {
    let mut diodes: HashMap<String, bool> = HashMap::new();
    for entry in &section.entries {
        let Some(role) = uses.get(entry.key) else {
            continue;
        };
        let mut name = entry.key;
        // A class already told ends the walk, a circle included.
        while !diodes.contains_key(name) {
            diodes.insert(name.to_owned(), *role == Role::Diode);
            match tables.get(name).and_then(like) {
                Some(next) => name = next,
                None => break,
            }
        }
    }
    for (name, fields) in tables {
        let of_diode = fields
            .entries
            .iter()
            .filter(|entry| Key::find(DIODE, entry.key).is_some())
            .count();
        let of_transistor = fields
            .entries
            .iter()
            .filter(|entry| Key::find(TRANSISTOR, entry.key).is_some())
            .count();
        diodes
            .entry((*name).to_owned())
            .or_insert(of_diode > of_transistor);
    }
    diodes
}

/// Completes the class `name` and every class it is `like`, however long the chain.
pub(super) fn resolve(
    reader: &mut Reader,
    name: &str,
    tables: &Tables,
    diodes: &HashMap<String, bool>,
    uses: &HashMap<String, Role>,
    done: &mut HashMap<String, Device>,
) {
    let mut chain: Vec<&str> = Vec::new();
    let mut on_chain: HashMap<&str, ()> = HashMap::new();
    let mut next = tables.get_key_value(name).map(|(name, _)| *name);
    while let Some(current) = next.filter(|current| !done.contains_key(*current)) {
        if on_chain.insert(current, ()).is_some() {
            let at = tables[current]
                .get("like")
                .map_or(tables[current].at, |entry| entry.at);
            reader.fault(at, || {
                format!(
                    "[devices.{current}]: like leads back to {} itself",
                    quoted(current)
                )
            });
            break;
        }
        chain.push(current);
        // A class named like a built-in one may start from that one.
        next = like(&tables[current])
            .filter(|base| *base != current || classes::find(base).is_none())
            .and_then(|base| tables.get_key_value(base).map(|(base, _)| *base));
    }
    for current in chain.into_iter().rev() {
        let diode = diodes.get(current).copied().unwrap_or(false);
        let device = complete(
            reader,
            tables,
            current,
            diode,
            uses.contains_key(current),
            done,
        );
        done.insert(current.to_owned(), device);
    }
}

/// The class of one table, its base being complete.
fn complete(
    reader: &mut Reader,
    tables: &Tables,
    name: &str,
    diode: bool,
    used: bool,
    done: &HashMap<String, Device>,
) -> Device {
    let fields = &tables[name];
    let base = match fields.string(reader, "like") {
        Given::Value((base, at)) => base_of(reader, fields, base, at, tables, done),
        Given::Faulty => None,
        Given::Missing => {
            if used {
                refuse_missing(reader, fields, diode);
            }
            None
        }
    };
    let mut device = base.unwrap_or_else(|| Device::blank(diode));
    read_parameters(reader, fields, &mut device);
    device
}

fn base_of(
    reader: &mut Reader,
    fields: &Fields,
    base: &str,
    at: usize,
    tables: &Tables,
    done: &HashMap<String, Device>,
) -> Option<Device> {
    let own = done.get(base).cloned();
    let found = own.or_else(|| classes::find(base).map(Device::built_in));
    // A base that is in the file and not complete closes a circle, which has its own message.
    if found.is_none() && !tables.contains_key(base) {
        let built_in = classes::all().iter().map(|class| class.name.as_str());
        reader.fault(at, || {
            let hint = names::hint(base, tables.keys().copied().chain(built_in));
            format!("{}unknown device {}{hint}", fields.prefix(), quoted(base))
        });
    }
    found
}

fn refuse_missing(reader: &mut Reader, fields: &Fields, diode: bool) {
    let required: &[(&str, Unit)] = if diode {
        &[("saturation_current", Unit::Ampere)]
    } else {
        &[
            ("saturation_current", Unit::Ampere),
            ("forward_gain", Unit::Plain),
        ]
    };
    for (key, unit) in required.iter().filter(|(key, _)| !fields.has(key)) {
        reader.fault(fields.at, || {
            format!(
                "{}{key} is missing; needs {}, or start from a class by like",
                fields.prefix(),
                unit.wanted()
            )
        });
    }
}

fn read_parameters(reader: &mut Reader, fields: &Fields, device: &mut Device) {
    match &mut device.parameters {
        Parameters::Transistor(_, set) => {
            refuse_unknown(
                reader,
                fields,
                TRANSISTOR,
                &["like", "gain_range", "ratings"],
            );
            fields.fill(reader, set.as_mut(), TRANSISTOR);
            if let Some(range) = gain_range(reader, fields) {
                device.gain_range = Some(range);
            }
            ratings(reader, fields, TRANSISTOR_RATINGS, &mut device.ratings);
        }
        Parameters::Diode(set) => {
            refuse_unknown(reader, fields, DIODE, &["like", "ratings"]);
            fields.fill(reader, set.as_mut(), DIODE);
            ratings(reader, fields, DIODE_RATINGS, &mut device.ratings);
        }
    }
}

fn refuse_unknown<P>(reader: &mut Reader, fields: &Fields, keys: &[Key<P>], others: &[&str]) {
    let known: Vec<&str> = others
        .iter()
        .copied()
        .chain(keys.iter().map(|key| key.name))
        .collect();
    for entry in fields
        .entries
        .iter()
        .filter(|entry| !known.contains(&entry.key))
    {
        reader.fault(entry.key_at, || {
            let hint = names::hint(entry.key, known.iter().copied());
            format!(
                "{}unknown parameter {}{hint}",
                fields.prefix(),
                quoted(entry.key)
            )
        });
    }
}

fn ratings(reader: &mut Reader, fields: &Fields, keys: &[Key<Ratings>], ratings: &mut Ratings) {
    let Some(entry) = fields.get("ratings") else {
        return;
    };
    let owner = format!("{} ratings", fields.owner);
    if let Some(given) = Fields::of(reader, owner, entry) {
        let known: Vec<&str> = keys.iter().map(|key| key.name).collect();
        given.refuse_unknown(reader, &known);
        given.fill(reader, ratings, keys);
    }
}

fn gain_range(reader: &mut Reader, fields: &Fields) -> Option<[f64; 2]> {
    let entry = fields.get("gain_range")?;
    let ends: Vec<f64> = entry
        .elements()
        .unwrap_or_default()
        .iter()
        .filter_map(|end| engineering::parse(&end.text()?, Unit::Plain).ok())
        .collect();
    match ends[..] {
        [low, high]
            if 0.0 < low && low <= high && entry.elements().is_some_and(|all| all.len() == 2) =>
        {
            Some([low, high])
        }
        _ => {
            reader.fault(entry.at, || {
                format!(
                    "{}gain_range must be lowest and highest gain, such as [200, 800]",
                    fields.prefix()
                )
            });
            None
        }
    }
}
