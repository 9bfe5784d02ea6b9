//! The built-in device classes of `classes.toml`: generic, invented, typical of their class.

use std::sync::OnceLock;

use toml::de::{DeTable, DeValue};

use super::keys::{DIODE, DIODE_RATINGS, Key, TRANSISTOR, TRANSISTOR_RATINGS};
use super::{DiodeParameters, Polarity, Ratings, TransistorParameters};
use crate::quantity::engineering;

/// A built-in class.
#[derive(Clone, Debug, PartialEq)]
pub struct Class {
    /// Its name in a stage file.
    pub name: String,
    /// What it is, in a few words.
    pub purpose: String,
    /// Its parameters.
    pub parameters: ClassParameters,
    /// Lowest and highest forward gain a data sheet of the class would promise.
    pub gain_range: Option<[f64; 2]>,
    /// What such a device stands.
    pub ratings: Ratings,
}

/// The parameters of a class, which also say what kind of device it is.
#[derive(Clone, Debug, PartialEq)]
pub enum ClassParameters {
    /// A transistor of one polarity.
    Transistor(Polarity, Box<TransistorParameters>),
    /// A diode.
    Diode(Box<DiodeParameters>),
}

/// Every built-in class, by name.
pub fn all() -> &'static [Class] {
    static CLASSES: OnceLock<Vec<Class>> = OnceLock::new();
    // The text is part of the program and read by a test; a fault in it cannot reach a user.
    CLASSES.get_or_init(|| read(include_str!("classes.toml")).unwrap_or_default())
}

/// The class of that name.
pub fn find(name: &str) -> Option<&'static Class> {
    all().iter().find(|class| class.name == name)
}

fn read(text: &str) -> Result<Vec<Class>, String> {
    let document = DeTable::parse(text).map_err(|error| error.to_string())?;
    document
        .get_ref()
        .iter()
        .map(|(name, value)| class(name.get_ref(), value.get_ref()))
        .collect()
}

fn class(name: &str, value: &DeValue) -> Result<Class, String> {
    let table = value.as_table().ok_or(format!("{name} is no table"))?;
    let parameters = match text(table, "kind")?.as_str() {
        "npn" => transistor(Polarity::Npn, table)?,
        "pnp" => transistor(Polarity::Pnp, table)?,
        "diode" => diode(table)?,
        other => return Err(format!("{name} is of kind {other}")),
    };
    let rating_keys = match parameters {
        ClassParameters::Transistor(..) => TRANSISTOR_RATINGS,
        ClassParameters::Diode(_) => DIODE_RATINGS,
    };
    let mut ratings = Ratings::default();
    if let Some(given) = table
        .get("ratings")
        .and_then(|value| value.get_ref().as_table())
    {
        fill(&mut ratings, given, rating_keys, &[])?;
    }
    let purpose = text(table, "purpose")?;
    Ok(Class {
        name: name.to_owned(),
        purpose,
        parameters,
        gain_range: gain_range(table)?,
        ratings,
    })
}

/// Keys of a class that are no parameters.
const ABOUT: [&str; 4] = ["kind", "purpose", "gain_range", "ratings"];

fn transistor(polarity: Polarity, table: &DeTable) -> Result<ClassParameters, String> {
    let mut parameters = TransistorParameters::exponential(f64::NAN, f64::NAN);
    fill(&mut parameters, table, TRANSISTOR, &ABOUT)?;
    Ok(ClassParameters::Transistor(polarity, Box::new(parameters)))
}

fn diode(table: &DeTable) -> Result<ClassParameters, String> {
    let mut parameters = DiodeParameters::exponential(f64::NAN);
    fill(&mut parameters, table, DIODE, &ABOUT)?;
    Ok(ClassParameters::Diode(Box::new(parameters)))
}

fn fill<P>(set: &mut P, table: &DeTable, keys: &[Key<P>], others: &[&str]) -> Result<(), String> {
    for (name, value) in table
        .iter()
        .filter(|(name, _)| !others.contains(&name.get_ref().as_ref()))
    {
        let name = name.get_ref();
        let key = Key::find(keys, name).ok_or(format!("no parameter {name}"))?;
        let value = number(value.get_ref(), key)?;
        if !key.range.holds(value) {
            return Err(format!("{name} {}", key.range.demand(key.unit)));
        }
        (key.set)(set, value);
    }
    Ok(())
}

fn number<P>(value: &DeValue, key: &Key<P>) -> Result<f64, String> {
    let text = match value {
        DeValue::String(text) => text,
        DeValue::Integer(number) => number.as_str(),
        DeValue::Float(number) => number.as_str(),
        _ => return Err(format!("{} is no value", key.name)),
    };
    engineering::parse(text, key.unit).map_err(|error| format!("{}: {error}", key.name))
}

fn text(table: &DeTable, key: &str) -> Result<String, String> {
    let value = table.get(key).and_then(|value| value.get_ref().as_str());
    value.map(str::to_owned).ok_or(format!("{key} is missing"))
}

fn gain_range(table: &DeTable) -> Result<Option<[f64; 2]>, String> {
    let Some(given) = table.get("gain_range") else {
        return Ok(None);
    };
    let ends = given.get_ref().as_array().ok_or("gain_range is no pair")?;
    let ends: Vec<f64> = ends
        .iter()
        .filter_map(|end| end.get_ref().as_integer()?.as_str().parse().ok())
        .collect();
    match ends[..] {
        [low, high] if 0.0 < low && low < high => Ok(Some([low, high])),
        _ => Err("gain_range is no rising pair".to_owned()),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_built_in_classes_read_without_a_fault() {
        let classes = read(include_str!("classes.toml")).unwrap();
        let names: Vec<_> = classes.iter().map(|class| class.name.as_str()).collect();
        assert_eq!(
            names,
            [
                "npn-small-signal",
                "pnp-germanium",
                "pnp-small-signal",
                "silicon-switching"
            ]
        );
        assert_eq!(all(), classes);
    }

    #[test]
    fn every_class_states_its_required_parameters_inside_its_gain_range() {
        for class in all() {
            match &class.parameters {
                ClassParameters::Transistor(_, set) => {
                    let [low, high] = class.gain_range.unwrap();
                    assert!(set.saturation_current > 0.0, "{}", class.name);
                    assert!((low..=high).contains(&set.forward_gain), "{}", class.name);
                }
                ClassParameters::Diode(set) => {
                    assert!(set.saturation_current > 0.0, "{}", class.name)
                }
            }
        }
    }

    #[test]
    fn a_slip_in_the_class_file_is_named() {
        assert_eq!(
            read("[x]\nkind = \"npn\"\npurpose = \"\"\nsaturation_current = \"1f\"\nbandgab = 1")
                .unwrap_err(),
            "no parameter bandgab"
        );
    }
}
