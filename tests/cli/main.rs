//! The program as a person or a script meets it: text, JSON, exit codes, and that a refusal leaves nothing behind.
#![expect(
    clippy::unwrap_used,
    clippy::panic,
    reason = "helpers of tests, outside the test functions"
)]

mod calibrate;
mod export_import;
mod harness;
mod record;
mod status;
mod terminal;
