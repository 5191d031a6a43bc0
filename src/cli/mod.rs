//! # The command line: one file per command; parse, call, print

use std::process::ExitCode;

/// Runs the program with the process's arguments.
pub fn run() -> ExitCode {
    ExitCode::SUCCESS
}
