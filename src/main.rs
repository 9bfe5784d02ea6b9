//! The `cleanswing` program: parse, run, print the error once, exit code.

use std::process::ExitCode;

fn main() -> ExitCode {
    cleanswing::commands::run_from_arguments()
}
