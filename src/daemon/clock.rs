//! # The only place that reads a clock

use crate::electrode::units::Timestamp;
use std::time::Instant;

/// Wall time, UTC.
#[expect(
    clippy::disallowed_methods,
    reason = "this is the one place that reads the clock"
)]
pub fn now() -> Timestamp {
    Timestamp::from_ms(chrono::Utc::now().timestamp_millis())
}

/// Monotonic time.
#[expect(
    clippy::disallowed_methods,
    reason = "this is the one place that reads the clock"
)]
pub fn instant() -> Instant {
    Instant::now()
}
