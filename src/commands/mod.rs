//! One short file a subcommand: read, build, solve, measure, present.

mod bias;
mod demo;
mod distortion;
mod error;
mod interrupt;
mod listen;
mod output;
mod progress;
mod report;
mod stage;
mod start;

use std::process::ExitCode;

use clap::Parser;

use crate::cli::{Arguments, Command};
pub use error::CommandError;

/// Parse the process arguments, run the command, print any error once, and return the exit code.
pub fn run_from_arguments() -> ExitCode {
    let arguments = match Arguments::try_parse() {
        Ok(arguments) => arguments,
        Err(refusal) => {
            // help and version arrive here too; nobody is left to tell where printing fails
            let _ = refusal.print();
            return ExitCode::from(u8::try_from(refusal.exit_code()).unwrap_or(2));
        }
    };
    interrupt::install();
    match run(&arguments.command) {
        Ok(()) => ExitCode::SUCCESS,
        Err(error) => {
            output::say(&format!("{error}\n"));
            ExitCode::from(error.kind().exit_code())
        }
    }
}

fn run(command: &Command) -> Result<(), CommandError> {
    match command {
        Command::Demo => demo::run(),
        Command::Start(arguments) => start::run(arguments),
        Command::Bias(arguments) => bias::run(arguments),
        Command::Distortion(arguments) => distortion::run(arguments),
        Command::Listen(arguments) => listen::run(arguments),
    }
}
