//! # halfcell: whether to trust the number on the meter
//!
//! Reads raw millivolts and temperature off serial lines, turns them into pH or Eh with the calibration in force
//! for the electrode in the liquid, states the uncertainty of every value, keeps the raw data for good, and watches
//! each electrode age. `DEVELOPERS.md` is the map of the rooms; each room's `mod.rs` says what comes in and goes out.

pub mod cli;
pub mod config;
pub mod daemon;
pub mod electrode;
pub mod ledger;
pub mod meters;
pub mod pipeline;
pub mod simulation;
pub mod watch;
pub mod water;
