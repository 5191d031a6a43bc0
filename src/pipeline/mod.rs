//! # The pipeline: a sample and what is in force make a judged reading
//!
//! One code for live, imported and simulated samples. in: what arrived for a point, the point, the book. out: a reading.
//! Always: the same arrival under the same book gives the same reading to the bit, however it came.
//! Names no SQL and no clock: the caller fetches what is in force and stores what comes out.

pub mod interval;
pub mod reading;

pub use reading::{Arrival, Figure, read};
