//! Lines over real pseudo-terminals: the task that owns a port on one side, a scripted peer on the other.

#![expect(clippy::unwrap_used, reason = "a test stops where it cannot go on")]
mod corpus;
mod faults;
mod harness;
mod independent;
mod laws;
mod listen;
mod protocols;
mod storm;
mod unplug;
