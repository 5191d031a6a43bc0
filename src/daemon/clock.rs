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

/// Monotonic time, for waiting.
#[expect(
    clippy::disallowed_methods,
    reason = "this is the one place that reads the clock"
)]
pub fn instant() -> Instant {
    Instant::now()
}

/// Milliseconds since boot, sleep included: what the wall clock is held against.
pub fn since_boot_ms() -> i64 {
    let t = rustix::time::clock_gettime(rustix::time::ClockId::Boottime);
    t.tv_sec
        .saturating_mul(1_000)
        .saturating_add(t.tv_nsec / 1_000_000)
}

/// A forward jump of the wall clock beyond this is a step.
const FORWARD_MS: i64 = 2_000;
/// A backward jump beyond this is a step.
const BACKWARD_MS: i64 = 50;

/// Notices when the wall clock jumps against the time since boot. Slewing, a little at each look, is no step.
#[derive(Debug)]
pub struct StepWatch {
    ahead_ms: i64,
}

/// A jump of the wall clock.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Step {
    /// What the wall clock would have said.
    pub before: Timestamp,
    /// What it says.
    pub after: Timestamp,
}

impl StepWatch {
    /// Begins to watch.
    pub fn new(wall: Timestamp, since_boot_ms: i64) -> Self {
        Self {
            ahead_ms: wall.ms() - since_boot_ms,
        }
    }

    /// Looks at both clocks.
    pub fn look(&mut self, wall: Timestamp, since_boot_ms: i64) -> Option<Step> {
        let before = Timestamp::from_ms(self.ahead_ms + since_boot_ms);
        self.ahead_ms = wall.ms() - since_boot_ms;
        let jump = wall.ms() - before.ms();
        (!(-BACKWARD_MS..=FORWARD_MS).contains(&jump)).then_some(Step {
            before,
            after: wall,
        })
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn an_hour_back_is_a_step_and_slewing_is_not() {
        let mut watch = StepWatch::new(Timestamp::from_ms(1_000_000), 0);
        for second in 1..=1_000 {
            // 0.5 ms/s, the fastest a clock is usually slewed.
            assert_eq!(
                watch.look(
                    Timestamp::from_ms(1_000_000 + second * 1_000 - second / 2),
                    second * 1_000
                ),
                None
            );
        }
        let wall = Timestamp::from_ms(1_000_000 + 1_001_000 - 500 - 3_600_000);
        let step = watch.look(wall, 1_001_000).unwrap();
        assert_eq!(step.after, wall);
        assert_eq!(step.before.ms() - step.after.ms(), 3_600_000);
        assert_eq!(
            watch.look(wall.plus_ms(1_000), 1_002_000),
            None,
            "a step is told once"
        );
    }
}
