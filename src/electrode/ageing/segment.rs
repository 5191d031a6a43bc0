//! # Offset and slope with their covariance over a stretch of time, cheap enough for every reading
//!
//! A track's figures move smoothly between events, so over a day a straight line in time carries each of the five: per reading
//! that is five multiplications and additions.

use super::filter::{DRIFT, OFFSET, SLOPE, State};
use crate::electrode::convert::Converted;
use crate::electrode::history::ElectrodeLine;
use crate::electrode::units::Timestamp;

/// Longest stretch, ms: a day.
const LONGEST_MS: i64 = 86_400_000;

/// Mean and covariance of offset and slope: an [`ElectrodeLine`], as conversion takes it.
pub(super) type Moments = ElectrodeLine;

/// A stretch of time on which the line moves straight.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Segment {
    /// First moment.
    pub from: Timestamp,
    /// First moment after it.
    pub until: Timestamp,
    start: Moments,
    per_ms: Moments,
}

impl Segment {
    /// The stretch around `t` between the event before and the one after.
    pub(super) fn around(
        t: Timestamp,
        after: Timestamp,
        next: Option<Timestamp>,
    ) -> (Timestamp, Timestamp) {
        let n = (t.ms() - after.ms()) / LONGEST_MS;
        let from = after.plus_ms(n * LONGEST_MS);
        let until = from.plus_ms(LONGEST_MS);
        (from, next.map_or(until, |next| next.min(until)))
    }

    pub(super) fn between(from: Timestamp, start: Moments, until: Timestamp, end: Moments) -> Self {
        #[expect(clippy::cast_precision_loss, reason = "at most a day in ms")]
        let ms = (until.ms() - 1 - from.ms()).max(1) as f64;
        let per_ms = |pick: fn(&Moments) -> f64| (pick(&end) - pick(&start)) / ms;
        Self {
            from,
            until,
            start,
            per_ms: Moments {
                offset_mv: per_ms(|m| m.offset_mv),
                slope: per_ms(|m| m.slope),
                var_offset_mv2: per_ms(|m| m.var_offset_mv2),
                var_slope: per_ms(|m| m.var_slope),
                cov_mv: per_ms(|m| m.cov_mv),
            },
        }
    }

    /// Whether `t` lies on it.
    pub fn holds(&self, t: Timestamp) -> bool {
        self.from <= t && t < self.until
    }

    /// Offset and slope with covariance at `t`, which should lie on it.
    pub fn line_at(&self, t: Timestamp) -> ElectrodeLine {
        #[expect(clippy::cast_precision_loss, reason = "at most a day in ms")]
        let ms = t.ms().saturating_sub(self.from.ms()) as f64;
        let (a, b) = (&self.start, &self.per_ms);
        ElectrodeLine {
            offset_mv: a.offset_mv + ms * b.offset_mv,
            slope: a.slope + ms * b.slope,
            var_offset_mv2: a.var_offset_mv2 + ms * b.var_offset_mv2,
            var_slope: a.var_slope + ms * b.var_slope,
            cov_mv: a.cov_mv + ms * b.cov_mv,
        }
    }
}

/// Expanded uncertainty (k = 2) to state with a `value` made by the calibration in force, when `best` is what the electrode's track
/// makes of the same millivolts: `u = 2·√(u_c²(best) + (value − best)²)`, the root mean square error about the value under the filter.
/// Signal, temperature and residual junction are in `best.u` already.
pub fn u_of_value(value: f64, best: &Converted) -> f64 {
    (best.u * best.u + 4.0 * (value - best.value).powi(2)).sqrt()
}

impl Moments {
    /// Moments of a weighted mixture: mean of the means; mean of the covariances plus the spread of the means.
    pub(super) fn mixed(states: &[State], weights: &[f64]) -> Self {
        let mut sum = [0.0; 2];
        for (s, w) in states.iter().zip(weights) {
            sum[0] += w * s.mean[OFFSET];
            sum[1] += w * s.mean[SLOPE];
        }
        let [offset_mv, slope] = sum;
        let mut line = Self {
            offset_mv,
            slope,
            var_offset_mv2: 0.0,
            var_slope: 0.0,
            cov_mv: 0.0,
        };
        for (s, w) in states.iter().zip(weights) {
            let o = s.mean[OFFSET] - offset_mv;
            let g = s.mean[SLOPE] - slope;
            line.var_offset_mv2 += w * (s.cov[OFFSET][OFFSET] + o * o);
            line.var_slope += w * (s.cov[SLOPE][SLOPE] + g * g);
            line.cov_mv += w * (s.cov[OFFSET][SLOPE] + o * g);
        }
        line
    }

    /// Variance of `h[0]·offset + h[1]·slope`.
    pub(super) fn variance_along(&self, h: [f64; 2]) -> f64 {
        h[0] * h[0] * self.var_offset_mv2
            + 2.0 * h[0] * h[1] * self.cov_mv
            + h[1] * h[1] * self.var_slope
    }
}

impl State {
    /// Moments of a weighted mixture of states.
    pub(super) fn mixed(states: &[Self], weights: &[f64]) -> Self {
        let mut mean = [0.0; 4];
        for (s, w) in states.iter().zip(weights) {
            for (m, x) in mean.iter_mut().zip(s.mean) {
                *m += w * x;
            }
        }
        let mut cov = [[0.0; 4]; 4];
        for (s, w) in states.iter().zip(weights) {
            for i in 0..4 {
                for j in 0..4 {
                    cov[i][j] += w * (s.cov[i][j] + (s.mean[i] - mean[i]) * (s.mean[j] - mean[j]));
                }
            }
        }
        Self { mean, cov }
    }

    /// Its offset and slope with their covariance, as conversion takes them.
    pub fn line(&self) -> ElectrodeLine {
        ElectrodeLine {
            offset_mv: self.mean[OFFSET],
            slope: self.mean[SLOPE],
            var_offset_mv2: self.cov[OFFSET][OFFSET],
            var_slope: self.cov[SLOPE][SLOPE],
            cov_mv: self.cov[OFFSET][SLOPE],
        }
    }

    /// How fast the offset moves, mV/day.
    pub fn drift_mv_per_day(&self) -> f64 {
        self.mean[DRIFT]
    }
}
