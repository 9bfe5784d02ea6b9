//! `[devices]`: the file's own device classes, started from others by `like`, beside the built-in ones.

use std::collections::HashMap;

use super::names;
use super::table::{Entry, Fields, Given, Reader};
use crate::device::classes::{self, Class, ClassParameters};
use crate::device::keys::{DIODE, DIODE_RATINGS, Key, TRANSISTOR, TRANSISTOR_RATINGS};
use crate::device::{DiodeParameters, Polarity, Ratings, TransistorParameters};
use crate::quantity::{Unit, engineering, quoted};

/// What a part takes its device for.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Role {
    Diode,
    Npn,
    Pnp,
}

impl Role {
    pub(super) fn of_key(key: &str) -> Option<Role> {
        match key {
            "diode" => Some(Role::Diode),
            "npn" => Some(Role::Npn),
            "pnp" => Some(Role::Pnp),
            _ => None,
        }
    }

    fn polarity(self) -> Option<Polarity> {
        match self {
            Role::Diode => None,
            Role::Npn => Some(Polarity::Npn),
            Role::Pnp => Some(Polarity::Pnp),
        }
    }

    fn example(self) -> &'static str {
        match self {
            Role::Diode => "silicon-switching",
            Role::Npn => "npn-small-signal",
            Role::Pnp => "pnp-small-signal",
        }
    }
}

/// The parameters of a device class and with them its kind.
#[derive(Clone, Debug, PartialEq)]
pub(super) enum Parameters {
    /// The polarity is open where the class was built from nothing: either kind of part may use it.
    Transistor(Option<Polarity>, Box<TransistorParameters>),
    Diode(Box<DiodeParameters>),
}

/// One device class, complete.
#[derive(Clone, Debug, PartialEq)]
pub(super) struct Device {
    pub(super) parameters: Parameters,
    pub(super) gain_range: Option<[f64; 2]>,
    pub(super) ratings: Ratings,
}

impl Device {
    pub(super) fn built_in(class: &Class) -> Device {
        let parameters = match &class.parameters {
            ClassParameters::Transistor(polarity, set) => {
                Parameters::Transistor(Some(*polarity), set.clone())
            }
            ClassParameters::Diode(set) => Parameters::Diode(set.clone()),
        };
        Device {
            parameters,
            gain_range: class.gain_range,
            ratings: class.ratings.clone(),
        }
    }

    /// Saturation current and gain of one stand in until they are read or their absence is a fault.
    fn blank(diode: bool) -> Device {
        let parameters = if diode {
            Parameters::Diode(Box::new(DiodeParameters::exponential(1.0)))
        } else {
            Parameters::Transistor(None, Box::new(TransistorParameters::exponential(1.0, 1.0)))
        };
        Device {
            parameters,
            gain_range: None,
            ratings: Ratings::default(),
        }
    }

    /// Whether the device can serve in `role`; otherwise what it is.
    pub(super) fn serves(&self, role: Role) -> Result<(), &'static str> {
        match (&self.parameters, role.polarity()) {
            (Parameters::Diode(_), None) => Ok(()),
            (Parameters::Diode(_), Some(_)) => Err("a diode"),
            (Parameters::Transistor(..), None) => Err("a transistor"),
            (Parameters::Transistor(None, _), Some(_)) => Ok(()),
            (Parameters::Transistor(Some(own), _), Some(wanted)) if *own == wanted => Ok(()),
            (Parameters::Transistor(Some(Polarity::Npn), _), _) => Err("an NPN transistor"),
            (Parameters::Transistor(Some(Polarity::Pnp), _), _) => Err("a PNP transistor"),
        }
    }
}

/// Every device class a part may name.
pub(super) struct Devices {
    own: HashMap<String, Device>,
}

impl Devices {
    /// Reads `[devices]`. `uses` says how the parts use each class, for classes that start from nothing.
    pub(super) fn read(
        reader: &mut Reader,
        section: Option<&Entry>,
        uses: &HashMap<String, Role>,
    ) -> Devices {
        let mut devices = Devices {
            own: HashMap::new(),
        };
        let Some(section) = section.and_then(|entry| Fields::of(reader, "[devices]", entry)) else {
            return devices;
        };
        let tables = tables(reader, &section);
        let diodes = diodes(&section, &tables, uses);
        for entry in &section.entries {
            resolve(reader, entry.key, &tables, &diodes, uses, &mut devices.own);
        }
        devices
    }

    /// The class of that name for a part in `role`; a fault at `at` where there is none or of another kind.
    pub(super) fn find(
        &self,
        reader: &mut Reader,
        part: &str,
        name: &str,
        role: Role,
        at: usize,
    ) -> Option<Device> {
        let built_in = || classes::find(name).map(Device::built_in);
        let Some(device) = self.own.get(name).cloned().or_else(built_in) else {
            reader.fault(at, || {
                format!(
                    "{part}: unknown device {}{}",
                    quoted(name),
                    self.hint(name, role)
                )
            });
            return None;
        };
        match device.serves(role) {
            Ok(()) => Some(device),
            Err(what) => {
                let word = match role {
                    Role::Diode => "diode",
                    Role::Npn => "npn",
                    Role::Pnp => "pnp",
                };
                reader.fault(at, || {
                    format!(
                        "{part}: device {} is {what}; {word} needs one like \"{}\"",
                        quoted(name),
                        role.example()
                    )
                });
                None
            }
        }
    }

    fn hint(&self, name: &str, role: Role) -> String {
        let fits = |device: &Device| device.serves(role).is_ok();
        let own = self
            .own
            .iter()
            .filter(|(_, device)| fits(device))
            .map(|(name, _)| name.as_str());
        let built_in = classes::all()
            .iter()
            .filter(|class| fits(&Device::built_in(class)))
            .map(|c| c.name.as_str());
        let mut candidates: Vec<&str> = own.chain(built_in).collect();
        candidates.sort_unstable();
        let hint = names::hint(name, candidates.iter().copied());
        if hint.is_empty() {
            format!(
                "; describe it under [devices.{}] or use a built-in such as \"{}\"",
                quoted(name),
                role.example()
            )
        } else {
            hint
        }
    }
}

type Tables<'a, 't> = HashMap<&'a str, Fields<'a, 't>>;

fn tables<'a, 't>(reader: &mut Reader, section: &Fields<'a, 't>) -> Tables<'a, 't> {
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
fn diodes(
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
fn resolve(
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
