//! `[devices]`: the file's own device classes, started from others by `like`, beside the built-in ones.

use std::collections::HashMap;

use super::device_tables::{diodes, resolve, tables};
use super::names;
use super::table::{Entry, Fields, Reader};
use crate::device::classes::{self, Class, ClassParameters};
use crate::device::{DiodeParameters, Polarity, Ratings, TransistorParameters};
use crate::quantity::quoted;

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
    pub(super) fn blank(diode: bool) -> Device {
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
