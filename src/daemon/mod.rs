//! # The daemon: tasks, supervision, the only clock, systemd
//!
//! in: a checked site. out: a ledger that grows while lines come and go.
//! Always: one task owns one port; one thread writes; whoever panics ends its own task only and is started again.
//! Not here: what a sample means (`pipeline`), how rows lie on disk (`ledger`).

pub mod backoff;
pub mod book;
pub mod clock;
mod hotplug;
pub mod hub;
pub mod line;
pub mod run;

/// An error with all its causes, for a log field.
pub fn chain(error: &dyn std::error::Error) -> String {
    let mut text = error.to_string();
    let mut cause = error.source();
    while let Some(inner) = cause {
        text.push_str(": ");
        text.push_str(&inner.to_string());
        cause = inner.source();
    }
    text
}
