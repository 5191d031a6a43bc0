//! # The pipeline: a sample and what is in force make a judged reading
//!
//! One code for live, imported and simulated samples. in: what arrived for a point, the point, what stands. out: a reading.
//! Always: the same arrival under the same facts gives the same reading to the bit, however it came.
//! Names no SQL and no clock: the caller fetches what is in force and stores what comes out.

pub mod interval;
pub mod reading;
pub mod standing;

pub use reading::{Arrival, Figure, read};
pub use standing::Standing;
