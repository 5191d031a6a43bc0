//! # The command line: one file per command; parse, call, print

pub mod config;

use std::process::ExitCode;

/// Runs the program with the process's arguments.
pub fn run() -> ExitCode {
    ExitCode::SUCCESS
}
