//! # Meters: bytes of a serial line in, samples or counted reasons out
//!
//! Always: a decoder is pure, incremental and bounded; each byte ends in a sample, in a counted reason, or in the buffer.
//! Not here: what a sample means (`pipeline`), the tasks that own the ports (`daemon`).

pub mod sample;
