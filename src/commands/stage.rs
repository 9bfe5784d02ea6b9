//! The stage a command works on.

use super::{CommandError, output};
use crate::cli::StageArguments;
use crate::stage::Stage;

/// Read the stage file, say its cautions on standard error, apply the overrides.
pub fn read(arguments: &StageArguments) -> Result<Stage, CommandError> {
    let (mut stage, cautions) = Stage::read(&arguments.stage)?;
    for caution in cautions {
        let line = match caution.line {
            0 => String::new(),
            line => format!(":{line}"),
        };
        let file = arguments.stage.display();
        output::say(&format!("{file}{line}: caution: {}\n", caution.message));
    }
    for change in &arguments.overrides {
        stage = stage.with(change)?;
    }
    Ok(stage)
}
