//! Lines over real pseudo-terminals: the task that owns a port on one side, a scripted peer on the other.

#![expect(clippy::unwrap_used, reason = "a test stops where it cannot go on")]
#![expect(clippy::panic, reason = "a test that waits in vain says for what")]

mod faults;
mod harness;
mod protocols;
mod unplug;
