//! # Ageing: what is known of an electrode between its checks, and ahead of them
//!
//! in: a probe's calibrations, verifications, services, grab samples and second probes. out: offset and slope with covariance at any
//! moment, forward (u of every value), backward (best), ahead (calibrate-by).
//! Always: 1. time comes in, nothing reads a clock; the same input gives the same bits. 2. covariances are symmetric and positive.
//! What it cannot see: a cleaning nobody recorded just before each calibration hides what went before; verify as-found, or record the
//! service, and it counts.
//! Not here: which calibration is in force (`history`), mV to pH (`convert`), what becomes of evidence (`watch`).

mod bank;
mod draws;
mod filter;
mod forecast;
mod learn;
mod noise;
mod observation;
pub mod proration;
mod segment;
mod track;
mod weights;

pub use draws::Draws;
pub use filter::{Matrix, State, Vector};
pub use forecast::{CalibrateBy, Demands, Reason, calibrate_by};
pub use learn::learn;
pub use noise::{Noise, Prior, Temperament};
pub use observation::{Comparison, Kind, Observation, Row, observe};
pub use segment::{Segment, u_of_value};
pub use track::{Event, HELD_OUT_BEYOND, Innovation, Outcome, Track};
