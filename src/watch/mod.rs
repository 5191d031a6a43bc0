//! # Watching: is the reading to be trusted, and who must know
//!
//! in: readings, evidence, limits, times, as values. out: flags, statuses, causes, alarms.
//! Always: no clock, no file, no log. Not here: the electrode's science (`electrode`).

pub mod condition;
pub mod flags;
pub mod reading;
pub mod status;
