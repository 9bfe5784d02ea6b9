//! `start`: the starters, or one of them.

use std::path::Path;

use super::output::{print, write_file};
use super::{CommandError, output};
use crate::cli::StartArguments;
use crate::stage::starters::{self, Starter};

/// Run `start`.
pub fn run(arguments: &StartArguments) -> Result<(), CommandError> {
    let Some(name) = &arguments.name else {
        return print(&listing());
    };
    let starter = starters::find(name)?;
    match &arguments.output {
        Some(path) if path.as_os_str() != "-" => write(starter, path, arguments.overwrite),
        _ => print(starter.text),
    }
}

/// A line a starter: its name, two spaces or more, what it is for.
fn listing() -> String {
    let width = starters::list().iter().map(|s| s.name.len()).max();
    let width = width.unwrap_or(0);
    starters::list()
        .iter()
        .map(|starter| format!("{:width$}  {}\n", starter.name, starter.purpose))
        .collect()
}

fn write(starter: &Starter, path: &Path, overwrite: bool) -> Result<(), CommandError> {
    write_file(path, starter.text, overwrite)?;
    output::say(&format!(
        "wrote {0}; next: cleanswing bias {0}\n",
        path.display()
    ));
    Ok(())
}
