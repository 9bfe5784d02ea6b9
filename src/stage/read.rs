//! A stage file, read: TOML with places, every fault reported at once.

use std::collections::HashMap;
use std::io::Read;
use std::path::Path;

use toml::de::DeTable;

use super::check::{self, NetworkPlace};
use super::description::Stage;
use super::devices::Devices;
use super::faults::{Caution, Faults, Lines, StageError};
use super::table::{Fields, Reader};
use super::{cautions, gang, parts, sections};
use crate::quantity::constants::REFERENCE_TEMPERATURE;
use crate::quantity::{parse_temperature, quoted};

/// The largest stage file read, in bytes; ten thousand parts take a tenth of it.
const LARGEST: u64 = 16 << 20;

/// The keys of a whole file.
const KEYS: [&str; 12] = [
    "title",
    "input",
    "output",
    "temperature",
    "source",
    "load",
    "rails",
    "parts",
    "devices",
    "nominal",
    "ratings",
    "targets",
];

impl Stage {
    /// Reads the stage file at `path`; `-` is the standard input.
    pub fn read(path: &Path) -> Result<(Stage, Vec<Caution>), StageError> {
        let name = path.display().to_string();
        let unreadable = |reason: String| StageError::Unreadable {
            file: name.clone(),
            reason,
        };
        let bytes = bytes(path).map_err(|error| unreadable(reason(&error)))?;
        if bytes.len() as u64 > LARGEST {
            return Err(unreadable(format!(
                "is no stage file: larger than {} MB",
                LARGEST >> 20
            )));
        }
        let text = String::from_utf8(bytes).map_err(|error| {
            let valid = error.utf8_error().valid_up_to();
            let line = 1 + error.as_bytes()[..valid]
                .iter()
                .filter(|byte| **byte == b'\n')
                .count();
            unreadable(format!("is no stage file: line {line} is not UTF-8 text"))
        })?;
        Stage::from_text(&name, &text)
    }

    /// Reads a stage from the text of a file; `file_name` is what messages call it, and its stem the default title.
    pub fn from_text(file_name: &str, text: &str) -> Result<(Stage, Vec<Caution>), StageError> {
        let text = text.strip_prefix('\u{feff}').unwrap_or(text);
        let (document, syntax) = DeTable::parse_recoverable(text);
        let mut reader = Reader {
            lines: Lines::of(text),
            faults: Faults::default(),
            cautions: Vec::new(),
            connections_known: true,
            broken_lines: Vec::new(),
        };
        note_syntax_errors(&mut reader, &syntax);
        let file = Fields::new("", 0, document.get_ref());
        let stage = stage(&mut reader, &file, file_name);
        match stage {
            Some(stage) if reader.faults.is_empty() => Ok((stage, reader.cautions)),
            _ => Err(reader.faults.into_error(file_name, &reader.lines)),
        }
    }
}

fn bytes(path: &Path) -> std::io::Result<Vec<u8>> {
    let mut bytes = Vec::new();
    if path.as_os_str() == "-" {
        std::io::stdin()
            .lock()
            .take(LARGEST + 1)
            .read_to_end(&mut bytes)?;
    } else {
        std::fs::File::open(path)?
            .take(LARGEST + 1)
            .read_to_end(&mut bytes)?;
    }
    Ok(bytes)
}

fn reason(error: &std::io::Error) -> String {
    match error.kind() {
        std::io::ErrorKind::NotFound => {
            "no such file; `cleanswing start` writes one to begin with".to_owned()
        }
        std::io::ErrorKind::IsADirectory => "is a directory, must be a stage file".to_owned(),
        _ => format!("cannot be read: {error}"),
    }
}

fn note_syntax_errors(reader: &mut Reader, errors: &[toml::de::Error]) {
    for error in errors {
        let at = error.span().map_or(0, |span| span.start);
        reader.faults.add(at, || syntax_message(error));
        reader.broken_lines.push(reader.lines.line(at));
        reader.connections_known = false;
    }
    reader.broken_lines.sort_unstable();
}

/// The parser's words, and what they mean here where it is the slip everyone makes.
fn syntax_message(error: &toml::de::Error) -> String {
    let message = error.message();
    if message.starts_with("string values must be quoted") {
        return "not TOML: a value with letters needs quotes, such as \"4k7\"".to_owned();
    }
    if message == "duplicate key" {
        return "this name stands here a second time; names and keys must differ".to_owned();
    }
    format!("not TOML: {message}")
}

fn stage(reader: &mut Reader, file: &Fields, file_name: &str) -> Option<Stage> {
    file.refuse_unknown(reader, &KEYS);
    let title = title(reader, file);
    let input = file.node(reader, "input");
    let output = file.node(reader, "output");
    let temperature = file
        .parsed(reader, "temperature", parse_temperature)
        .unwrap_or(REFERENCE_TEMPERATURE);
    let source = sections::source(reader, file.get("source"));
    let load = sections::load(reader, file.get("load"));
    let rails = sections::rails(reader, file.get("rails"));
    let devices = Devices::read(
        reader,
        file.get("devices"),
        &parts::device_uses(file.get("parts")),
    );
    let parts_section = file
        .get("parts")
        .and_then(|entry| Fields::of(reader, "[parts]", entry));
    if !file.has("parts") && !file.misspells("parts") {
        reader.fault(0, || "[parts] is missing; a stage needs parts".to_owned());
    }
    let mut parts = parts_section
        .as_ref()
        .map_or_else(Vec::new, |fields| parts::read(reader, fields, &devices));
    let part_names: Vec<&str> = parts_section
        .iter()
        .flat_map(|fields| &fields.entries)
        .map(|entry| entry.key)
        .collect();
    sections::ratings(reader, file.get("ratings"), &part_names, &mut parts);
    let nominal_input = sections::nominal(reader, file.get("nominal"));
    let targets = sections::targets(reader, file.get("targets"));
    refuse_shared_names(reader, file);
    if let Some(fields) = &parts_section {
        gang::follow(reader, fields, &mut parts);
    }
    let stage = Stage {
        title: title.unwrap_or_else(|| stem(file_name)),
        input: input?,
        output: output?,
        temperature,
        source,
        load,
        rails,
        parts,
        nominal_input,
        targets,
        overrides: Vec::new(),
    };
    if reader.connections_known {
        reader
            .faults
            .take_over(check::network_faults(&stage), |place| offset(file, place));
    }
    cautions::note(reader, file, &stage);
    Some(stage)
}

/// Where in the file a place of the network stands.
fn offset(file: &Fields, place: &NetworkPlace) -> usize {
    let value = |key: &str| file.get(key).map_or(0, |entry| entry.at);
    match place {
        NetworkPlace::Input => value("input"),
        NetworkPlace::Output => value("output"),
        NetworkPlace::Rail(name) => key_in(file, "rails", name),
        NetworkPlace::Part(name) => key_in(file, "parts", name),
        NetworkPlace::Terminal { part, key, index } => {
            terminal(file, part, key, *index).unwrap_or_else(|| key_in(file, "parts", part))
        }
    }
}

fn key_in(file: &Fields, section: &str, name: &str) -> usize {
    let table = file.get(section).and_then(|entry| entry.value.as_table());
    table
        .and_then(|table| table.get_key_value(name))
        .map_or(0, |(key, _)| key.span().start)
}

fn terminal(file: &Fields, part: &str, key: &str, index: usize) -> Option<usize> {
    let parts = file.get("parts")?.value.as_table()?;
    let node = parts.get(part)?.get_ref().as_table()?.get(key)?;
    let pin = node.get_ref().as_array().and_then(|pins| pins.get(index));
    Some(pin.unwrap_or(node).span().start)
}

fn title(reader: &mut Reader, file: &Fields) -> Option<String> {
    let (title, at) = file.string(reader, "title").value()?;
    // It is printed as it stands, on terminals too.
    if title.chars().any(char::is_control) {
        reader.fault(at, || {
            format!("title {} may have no control characters", quoted(title))
        });
    }
    Some(title.to_owned())
}

fn stem(file_name: &str) -> String {
    Path::new(file_name).file_stem().map_or_else(
        || "stage".to_owned(),
        |stem| stem.to_string_lossy().into_owned(),
    )
}

/// Parts and rails share one namespace, so that `NAME=VALUE` means one thing.
fn refuse_shared_names(reader: &mut Reader, file: &Fields) {
    let table = |key: &str| file.get(key).and_then(|entry| entry.value.as_table());
    let (Some(rails), Some(parts)) = (table("rails"), table("parts")) else {
        return;
    };
    let rails: HashMap<&str, usize> = rails
        .iter()
        .map(|(key, _)| (key.get_ref().as_ref(), key.span().start))
        .collect();
    for (part, _) in parts {
        let name = part.get_ref().as_ref();
        if let Some(rail) = rails.get(name) {
            let line = reader.lines.line(*rail);
            reader.fault(part.span().start, || {
                format!("[parts]: {} is also the rail of line {line}; parts and rails need different names", quoted(name))
            });
        }
    }
}
