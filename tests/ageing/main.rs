//! The ageing model: how honest u, best and calibrate-by are on electrodes whose truth is known; its laws; other people's arithmetic.

#![expect(
    clippy::unwrap_used,
    clippy::print_stdout,
    reason = "helpers of tests stop a test as tests do; the study shows its table"
)]

mod ahead;
mod events;
mod laws;
mod outsiders;
mod proration;
mod reference;
mod study;
mod support;
