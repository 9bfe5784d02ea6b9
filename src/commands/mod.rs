//! One short file a subcommand.

use std::process::ExitCode;

/// Parse the process arguments, run the command, print any error once, and return the exit code.
pub fn run_from_arguments() -> ExitCode {
    ExitCode::from(2)
}
