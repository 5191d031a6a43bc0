//! # Configuration: the plant engineer's TOML, as types that cannot be wrong
//!
//! in: the text of the file. out: a [`site::Site`], or every error at once with its place and what to write instead.
//! Also here, because everybody names times: how moments and durations are read and printed.
//! Not here: reading the clock, opening ports, the ledger.

mod check;
mod keys;
mod near;
pub mod problem;
mod raw;
pub mod site;
pub mod time;

pub use check::load;
pub use problem::{ConfigError, render, render_styled};
