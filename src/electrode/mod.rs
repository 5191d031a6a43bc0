//! # The electrode: science of the pH and ORP measurement
//!
//! in: millivolts, temperatures, buffers, times, as values. out: pH or Eh with its uncertainty, calibrations, states.
//! Always: no clock, no file, no log; quantities carry their unit in type or name; every constant names its source.
//! Not here: judging a stream (`watch`), how facts are kept (`ledger`), what a reading makes of them (`pipeline`).

pub mod ageing;
pub mod buffers;
pub mod convert;
pub mod fit;
pub mod glass;
pub mod history;
pub(crate) mod named;
pub mod orp;
pub mod slope;
pub mod solution;
pub mod standard;
pub mod temperature;
pub mod units;

pub use named::UnknownName;
