//! # Meters: bytes of a serial line in, samples or counted reasons out
//!
//! in: a [`Site`](crate::config::site::Site), the bytes of one line and the moments they came. out: [`machine::Action`]s, [`sample::Sample`]s and [`counters`].
//! Always: 1. A decoder is pure, incremental and bounded. 2. Each byte ends in a sample, in a counted reason, or in the buffer.
//! 3. No sample is made from two half lines, nor from an answer to another question.
//! Not here: what a sample means (`pipeline`), the tasks that own the ports (`daemon`).

pub mod checksum;
pub mod counters;
pub mod figure;
pub mod frame;
pub mod listen;
pub mod machine;
pub mod modbus;
pub mod own_time;
pub mod port;
pub mod query;
pub mod report;
pub mod sample;
pub mod splitter;
pub mod stream;
pub mod text;
pub(crate) mod turns;
