//! # The time a meter prints beside its figures, held against ours
//!
//! Rows are stamped by our clock alone; a meter's own is kept to be shown, for it may stand still, drift, or never have been set.

use crate::electrode::units::Timestamp;
use chrono::{DateTime, Timelike as _};
use chrono_tz::Tz;

const HALF_DAY_S: f64 = 43_200.0;

/// What is known of a meter's own clock.
#[derive(Debug, Clone, PartialEq)]
pub struct OwnClock {
    /// What it said last.
    pub said: String,
    /// How far it was ahead of ours then, s, half a day either way at most.
    pub ahead_s: f64,
    /// The same when it was heard first.
    pub first_ahead_s: f64,
}

impl OwnClock {
    /// What is known once it has said this too.
    pub(crate) fn hearing(
        before: Option<Self>,
        said: &str,
        at: Timestamp,
        zone: Tz,
    ) -> Option<Self> {
        let Some(ahead_s) = ahead_s(said, at, zone) else {
            return before;
        };
        Some(Self {
            said: said.to_owned(),
            ahead_s,
            first_ahead_s: before.map_or(ahead_s, |before| before.first_ahead_s),
        })
    }
}

/// How far the time of day in `said` is ahead of `at` in `zone`, s; `None` where no `HH:MM` stands in it. The date is not looked at:
/// which of its figures is the month is not to be known.
pub fn ahead_s(said: &str, at: Timestamp, zone: Tz) -> Option<f64> {
    let ours = DateTime::from_timestamp_millis(at.ms())?.with_timezone(&zone);
    let ours_s = f64::from(ours.num_seconds_from_midnight())
        + f64::from(ours.nanosecond() % 1_000_000_000) * 1e-9;
    let ahead = (time_of_day_s(said)? - ours_s).rem_euclid(2.0 * HALF_DAY_S);
    Some(if ahead > HALF_DAY_S {
        ahead - 2.0 * HALF_DAY_S
    } else {
        ahead
    })
}

/// The time of day in a text such as `02.03.2026 09:14:05,5` or `9:14 PM`, s since midnight.
fn time_of_day_s(said: &str) -> Option<f64> {
    let colon = said.find(':')?;
    let (before, after) = (said.get(..colon)?, said.get(colon + 1..)?);
    let digits = before.trim_end_matches(|c: char| c.is_ascii_digit()).len();
    let hour: f64 = whole(before.get(digits..)?)?;
    let minute: f64 = whole(after.get(..2)?)?;
    let rest = after.get(2..)?;
    let second = match rest.strip_prefix(':') {
        Some(seconds) => {
            let end = seconds.find(|c: char| !c.is_ascii_digit() && c != '.' && c != ',');
            let text = seconds
                .get(..end.unwrap_or(seconds.len()))?
                .replace(',', ".");
            text.trim_end_matches('.').parse().ok()?
        }
        None => 0.0,
    };
    let upper = said.to_ascii_uppercase();
    let hour = match (upper.contains("PM"), upper.contains("AM")) {
        (true, _) if hour < 12.0 => hour + 12.0,
        (_, true) if hour >= 12.0 => hour - 12.0,
        _ => hour,
    };
    (hour < 24.0 && minute < 60.0 && second < 61.0)
        .then_some(3_600.0 * hour + 60.0 * minute + second)
}

/// One or two digits.
fn whole(text: &str) -> Option<f64> {
    let plain = (1..=2).contains(&text.len()) && text.bytes().all(|b| b.is_ascii_digit());
    text.parse().ok().filter(|_| plain)
}

#[cfg(test)]
mod tests {
    use super::*;

    /// 2026-03-02 13:14:00 UTC, 09:14:00 in Halifax (UTC−4 before daylight saving time begins on 8 March).
    const AT: Timestamp = Timestamp::from_ms(1_772_457_240_000);
    const ZONE: Tz = chrono_tz::America::Halifax;

    #[test]
    fn a_meters_time_of_day_is_held_against_the_sites_own() {
        for (said, ahead) in [
            ("09:14:00", 0.0),
            ("2026-03-02 09:14:05.5", 5.5),
            ("02.03.26 09:13:59,0", -1.0),
            ("9:14 AM", 0.0),
            ("9:14:00 PM", -HALF_DAY_S),
            ("13:14:00", 14_400.0),
            ("21:13:59", HALF_DAY_S - 1.0),
        ] {
            let got = ahead_s(said, AT, ZONE).unwrap();
            let apart = (got - ahead).abs().min((got.abs() - ahead.abs()).abs());
            assert!(apart < 1e-6, "`{said}`: {got} s instead of {ahead} s");
        }
    }

    #[test]
    fn what_is_no_time_is_not_compared() {
        for said in [
            "",
            "2026-03-02",
            "091400",
            "25:00:00",
            "9:1",
            ":14:00",
            "09:61",
            "a:b",
        ] {
            assert_eq!(ahead_s(said, AT, ZONE), None, "`{said}`");
        }
    }

    #[test]
    fn drift_is_what_has_come_on_top_since_it_was_first_heard() {
        let first = OwnClock::hearing(None, "09:14:10", AT, ZONE);
        let later = OwnClock::hearing(first, "09:15:12", AT.plus_ms(60_000), ZONE);
        let kept = OwnClock::hearing(later, "--:--", AT.plus_ms(61_000), ZONE).unwrap();
        assert!(
            (kept.ahead_s - kept.first_ahead_s - 2.0).abs() < 1e-6,
            "{kept:?}"
        );
        assert_eq!(kept.said, "09:15:12");
    }
}
