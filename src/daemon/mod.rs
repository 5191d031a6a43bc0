//! # The daemon: tasks, supervision, the only clock, systemd

pub mod clock;
