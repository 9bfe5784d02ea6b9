//! TOML tables in file order with the places of their keys and values, and the checks every key shares.

use std::borrow::Cow;

use toml::Spanned;
use toml::de::{DeTable, DeValue};

use super::faults::{Caution, Faults, Lines};
use super::names;
use crate::device::keys::{Key, Range};
use crate::quantity::{Unit, ValueError, engineering, quoted};

/// What else people write for ground.
const GROUND_NAMES: [&str; 5] = ["gnd", "0", "ground", "earth", "0v"];

/// What reading a file collects besides the stage.
pub(super) struct Reader<'t> {
    pub(super) lines: Lines<'t>,
    pub(super) faults: Faults<usize>,
    pub(super) cautions: Vec<Caution>,
    /// Whether every connection of the circuit could be read; otherwise the network cannot be judged.
    pub(super) connections_known: bool,
    /// Lines with a syntax error, first to last: what the parser recovered there is not what was written.
    pub(super) broken_lines: Vec<usize>,
}

impl Reader<'_> {
    pub(super) fn fault(&mut self, at: usize, message: impl FnOnce() -> String) {
        if self
            .broken_lines
            .binary_search(&self.lines.line(at))
            .is_err()
        {
            self.faults.add(at, message);
        }
    }

    pub(super) fn caution(&mut self, at: usize, message: String) {
        self.cautions.push(Caution {
            line: self.lines.line(at),
            message,
        });
    }

    pub(super) fn caution_on_line(&mut self, line: usize, message: String) {
        self.cautions.push(Caution { line, message });
    }

    /// A fault after which the network cannot be judged.
    pub(super) fn connection_fault(&mut self, at: usize, message: impl FnOnce() -> String) {
        self.connections_known = false;
        self.fault(at, message);
    }
}

/// One key of a table.
#[derive(Clone, Copy, Debug)]
pub(super) struct Entry<'a, 't> {
    pub(super) key: &'a str,
    pub(super) key_at: usize,
    pub(super) value: &'a DeValue<'t>,
    pub(super) at: usize,
}

impl<'a, 't> Entry<'a, 't> {
    /// The value as text, a plain number included; `None` for any other type.
    pub(super) fn text(&self) -> Option<Cow<'a, str>> {
        match self.value {
            DeValue::String(text) => Some(Cow::Borrowed(text.as_ref())),
            DeValue::Float(number) => Some(Cow::Borrowed(number.as_str())),
            DeValue::Integer(number) if number.radix() == 10 => {
                Some(Cow::Borrowed(number.as_str()))
            }
            DeValue::Integer(number) => {
                let value = u64::from_str_radix(number.as_str(), number.radix()).ok();
                Some(value.map_or(Cow::Owned(number.to_string()), |value| {
                    Cow::Owned(value.to_string())
                }))
            }
            _ => None,
        }
    }

    /// The elements of an array with their places; `None` for any other type.
    pub(super) fn elements(&self) -> Option<Vec<Entry<'a, 't>>> {
        let array = self.value.as_array()?;
        let element = |value: &'a Spanned<DeValue<'t>>| {
            let at = value.span().start;
            Entry {
                key: self.key,
                key_at: at,
                value: value.get_ref(),
                at,
            }
        };
        Some(array.iter().map(element).collect())
    }

    /// `a table`, for messages.
    pub(super) fn type_name(&self) -> &'static str {
        match self.value {
            DeValue::String(_) => "text",
            DeValue::Integer(_) | DeValue::Float(_) => "a number",
            DeValue::Boolean(_) => "true or false",
            DeValue::Datetime(_) => "a date",
            DeValue::Array(_) => "a list",
            DeValue::Table(_) => "a table",
        }
    }

    pub(super) fn is_table(&self) -> bool {
        self.value.is_table()
    }
}

/// A value that may be absent or faulty; the fault is already recorded.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) enum Given<T> {
    Missing,
    Faulty,
    Value(T),
}

impl<T> Given<T> {
    /// The value, or `default` where it is missing or faulty.
    pub(super) fn unwrap_or(self, default: T) -> T {
        self.value().unwrap_or(default)
    }

    pub(super) fn value(self) -> Option<T> {
        match self {
            Given::Value(value) => Some(value),
            Given::Missing | Given::Faulty => None,
        }
    }
}

/// The keys of one table, in file order.
#[derive(Clone, Debug)]
pub(super) struct Fields<'a, 't> {
    /// What the table describes, as a message begins: `R1`, `[source]`; empty for the whole file.
    pub(super) owner: String,
    /// Where the table begins.
    pub(super) at: usize,
    pub(super) entries: Vec<Entry<'a, 't>>,
}

impl<'a, 't> Fields<'a, 't> {
    pub(super) fn new(owner: impl Into<String>, at: usize, table: &'a DeTable<'t>) -> Self {
        let mut entries: Vec<_> = table
            .iter()
            .map(|(key, value)| Entry {
                key: key.get_ref().as_ref(),
                key_at: key.span().start,
                value: value.get_ref(),
                at: value.span().start,
            })
            .collect();
        // The parser sorts by key; file order is what people see.
        entries.sort_by_key(|entry| entry.key_at);
        Fields {
            owner: owner.into(),
            at,
            entries,
        }
    }

    /// The table behind `entry`, or a fault.
    pub(super) fn of(
        reader: &mut Reader,
        owner: impl Into<String>,
        entry: &Entry<'a, 't>,
    ) -> Option<Self> {
        let owner = owner.into();
        match entry.value.as_table() {
            Some(table) => Some(Fields::new(owner, entry.key_at, table)),
            None => {
                reader.fault(entry.at, || {
                    format!("{owner} is {}, must be a table", entry.type_name())
                });
                None
            }
        }
    }

    pub(super) fn get(&self, key: &str) -> Option<&Entry<'a, 't>> {
        self.entries.iter().find(|entry| entry.key == key)
    }

    pub(super) fn has(&self, key: &str) -> bool {
        self.get(key).is_some()
    }

    /// Whether another key looks like `key`: its own message names the slip, and nothing is missing besides.
    pub(super) fn misspells(&self, key: &str) -> bool {
        self.entries
            .iter()
            .any(|entry| names::nearest(entry.key, [key]).is_some())
    }

    /// `R1: ` or nothing for the whole file.
    pub(super) fn prefix(&self) -> String {
        if self.owner.is_empty() {
            String::new()
        } else {
            format!("{}: ", self.owner)
        }
    }

    /// Faults for every key that is none of `known`.
    pub(super) fn refuse_unknown(&self, reader: &mut Reader, known: &[&str]) {
        for entry in self
            .entries
            .iter()
            .filter(|entry| !known.contains(&entry.key))
        {
            reader.fault(entry.key_at, || {
                let hint = names::hint(entry.key, known.iter().copied());
                let known = if hint.is_empty() {
                    format!("; known are {}", known.join(", "))
                } else {
                    hint
                };
                format!("{}unknown key {}{known}", self.prefix(), quoted(entry.key))
            });
        }
    }

    /// Reads `key` by `parse`, from text or a plain number.
    pub(super) fn parsed<T>(
        &self,
        reader: &mut Reader,
        key: &str,
        parse: impl Fn(&str) -> Result<T, ValueError>,
    ) -> Given<T> {
        let Some(entry) = self.get(key) else {
            return Given::Missing;
        };
        let Some(text) = entry.text() else {
            reader.fault(entry.at, || {
                format!(
                    "{}{key} is {}, must be a value in quotes or a plain number",
                    self.prefix(),
                    entry.type_name()
                )
            });
            return Given::Faulty;
        };
        match parse(&text) {
            Ok(value) => Given::Value(value),
            Err(error) => {
                reader.fault(entry.at, || format!("{}{key} {error}", self.prefix()));
                Given::Faulty
            }
        }
    }

    /// Reads `key` by `parse` and holds it to `range`.
    pub(super) fn in_range(
        &self,
        reader: &mut Reader,
        key: &str,
        unit: Unit,
        range: Range,
        parse: impl Fn(&str) -> Result<f64, ValueError>,
    ) -> Given<f64> {
        let given = self.parsed(reader, key, parse);
        if let (Given::Value(value), Some(entry)) = (given, self.get(key))
            && !range.holds(value)
        {
            let text = entry.text().unwrap_or_default();
            reader.fault(entry.at, || {
                format!(
                    "{}{key} is {}, {}",
                    self.prefix(),
                    text.trim(),
                    range.demand(unit)
                )
            });
            return Given::Faulty;
        }
        given
    }

    pub(super) fn quantity(
        &self,
        reader: &mut Reader,
        key: &str,
        unit: Unit,
        range: Range,
    ) -> Given<f64> {
        self.in_range(reader, key, unit, range, |text| {
            engineering::parse(text, unit)
        })
    }

    /// As `quantity`, where the key must be there; 1 stands in for a fault.
    pub(super) fn required(&self, reader: &mut Reader, key: &str, unit: Unit, range: Range) -> f64 {
        let given = self.quantity(reader, key, unit, range);
        if given == Given::Missing && !self.misspells(key) {
            reader.fault(self.at, || {
                format!("{}{key} is missing; needs {}", self.prefix(), unit.wanted())
            });
        }
        given.unwrap_or(1.0)
    }

    /// Text of `key`; a number or any other type is a fault.
    pub(super) fn string(&self, reader: &mut Reader, key: &str) -> Given<(&'a str, usize)> {
        let Some(entry) = self.get(key) else {
            return Given::Missing;
        };
        match entry.value {
            DeValue::String(text) => Given::Value((text.as_ref(), entry.at)),
            _ => {
                reader.fault(entry.at, || {
                    format!(
                        "{}{key} is {}, must be text in quotes",
                        self.prefix(),
                        entry.type_name()
                    )
                });
                Given::Faulty
            }
        }
    }

    pub(super) fn boolean(&self, reader: &mut Reader, key: &str) -> Given<bool> {
        let Some(entry) = self.get(key) else {
            return Given::Missing;
        };
        match entry.value {
            DeValue::Boolean(value) => Given::Value(*value),
            _ => {
                reader.fault(entry.at, || {
                    format!(
                        "{}{key} is {}, must be true or false",
                        self.prefix(),
                        entry.type_name()
                    )
                });
                Given::Faulty
            }
        }
    }

    /// A node name; a fault or a missing key leaves the connections unknown.
    pub(super) fn node(&self, reader: &mut Reader, key: &str) -> Option<String> {
        match self.string(reader, key) {
            Given::Value((name, at)) => self.node_name(reader, key, name, at),
            Given::Missing => {
                reader.connections_known = false;
                if !self.misspells(key) {
                    reader.fault(self.at, || {
                        format!("{}{key} is missing; needs a node name", self.prefix())
                    });
                }
                None
            }
            Given::Faulty => {
                reader.connections_known = false;
                None
            }
        }
    }

    pub(super) fn node_name(
        &self,
        reader: &mut Reader,
        key: &str,
        name: &str,
        at: usize,
    ) -> Option<String> {
        // another name for ground would be one more floating node
        if name != "gnd" && GROUND_NAMES.contains(&name.to_ascii_lowercase().as_str()) {
            reader.connection_fault(at, || {
                format!(
                    "{}{key}: node {name:?} would not be ground; ground is called gnd",
                    self.prefix()
                )
            });
            return None;
        }
        match names::check(name) {
            Ok(()) => Some(name.to_owned()),
            Err(error) => {
                reader.connection_fault(at, || format!("{}{key}: {error}", self.prefix()));
                None
            }
        }
    }

    /// Puts every key of `keys` that is given into `set`.
    pub(super) fn fill<P>(&self, reader: &mut Reader, set: &mut P, keys: &[Key<P>]) {
        for key in keys {
            if let Given::Value(value) = self.quantity(reader, key.name, key.unit, key.range) {
                (key.set)(set, value);
            }
        }
    }
}
