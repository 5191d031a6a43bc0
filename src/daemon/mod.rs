//! # The daemon: tasks, supervision, the only clock, systemd

pub mod backoff;
pub mod clock;
mod hotplug;
pub mod line;
