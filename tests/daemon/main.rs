//! The daemon as a user runs it: a real process, real pseudo-terminals, a real ledger.
#![expect(
    clippy::unwrap_used,
    reason = "helpers of tests: what fails there fails the test"
)]

mod demo;
mod harness;
mod killed;
mod lines;
mod service;
