//! The program as a person or a script meets it: text, JSON, exit codes, and that a refusal leaves nothing behind.

mod calibrate;
mod export_import;
mod harness;
mod record;
mod status;
mod terminal;
