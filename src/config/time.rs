//! # Moments and durations as people write and read them
//!
//! in: text, the site's zone, the present moment. out: a [`Timestamp`] or a `Duration`, and back to text.
//! Always: 1. what these functions print they read back. 2. a local time that never was, or was twice, is refused with the two moments it could mean.
//! Not here: reading the clock.

use crate::electrode::units::Timestamp;
use chrono::{
    DateTime, LocalResult, NaiveDate, NaiveDateTime, NaiveTime, Offset, SecondsFormat, TimeZone,
    Utc,
};
use chrono_tz::{GapInfo, Tz};
use std::time::Duration;

/// A text that names no moment, or not exactly one.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
pub enum TimeError {
    /// It has none of the shapes of a time.
    #[error(
        "`{text}` is no time; write `2026-03-02 09:14`, `2026-03-02T09:14:00Z`, `2026-03-02` or `-2h`"
    )]
    Unreadable {
        /// As given.
        text: String,
    },
    /// It is neither RFC 3339 nor milliseconds.
    #[error("`{text}` is no time; write `2026-03-02T09:14:00Z` or milliseconds since 1970")]
    UnreadableStamp {
        /// As given.
        text: String,
    },
    /// The clocks jumped over it in spring.
    #[error(
        "`{text}` never was in {zone}, the clocks went forward over it; write `{earlier}` or `{later}`"
    )]
    Skipped {
        /// As given.
        text: String,
        /// The site's zone.
        zone: Tz,
        /// Read with the offset after the jump, RFC 3339.
        earlier: String,
        /// Read with the offset before the jump, RFC 3339.
        later: String,
    },
    /// The clocks went back and it was twice.
    #[error("`{text}` was twice in {zone}, the clocks went back; write `{first}` or `{second}`")]
    Twice {
        /// As given.
        text: String,
        /// The site's zone.
        zone: Tz,
        /// The first of the two, RFC 3339.
        first: String,
        /// The second, RFC 3339.
        second: String,
    },
}

/// A text that is no duration.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
#[error("`{text}` is no duration; write `500ms`, `90s`, `5m`, `2h`, `7d` or `1h30m`")]
pub struct DurationError {
    /// As given.
    pub text: String,
}

/// The moment a person means: RFC 3339, `YYYY-MM-DD HH:MM[:SS]` in the site's zone, `YYYY-MM-DD` (the day's first moment there), or `-2h` before `now`.
///
/// # Errors
/// [`TimeError`]; a local time that was never or twice is refused with the two moments it could mean.
pub fn parse_time(text: &str, zone: Tz, now: Timestamp) -> Result<Timestamp, TimeError> {
    let text = text.trim();
    let unreadable = || TimeError::Unreadable {
        text: text.to_owned(),
    };
    if let Some(back) = text.strip_prefix('-') {
        let back = parse_duration(back).map_err(|_| unreadable())?;
        return Ok(now.plus_ms(-whole_ms(back)));
    }
    if let Ok(time) = DateTime::parse_from_rfc3339(text) {
        return Ok(Timestamp::from_ms(time.timestamp_millis()));
    }
    if let Ok(day) = NaiveDate::parse_from_str(text, "%Y-%m-%d") {
        return Ok(first_moment(day, zone));
    }
    let text_t = text.replacen('T', " ", 1);
    let local = ["%Y-%m-%d %H:%M:%S%.f", "%Y-%m-%d %H:%M"]
        .iter()
        .find_map(|shape| NaiveDateTime::parse_from_str(&text_t, shape).ok())
        .ok_or_else(unreadable)?;
    match zone.from_local_datetime(&local) {
        LocalResult::Single(time) => Ok(stamp(&time)),
        LocalResult::Ambiguous(first, second) => Err(TimeError::Twice {
            text: text.to_owned(),
            zone,
            first: offset_text(&first),
            second: offset_text(&second),
        }),
        LocalResult::None => Err(skipped(text, local, zone).unwrap_or_else(unreadable)),
    }
}

/// A moment of an import file: milliseconds since 1970-01-01T00:00:00Z, or RFC 3339. Figures beyond the millisecond are cut off.
///
/// # Errors
/// [`TimeError::UnreadableStamp`].
pub fn epoch_or_rfc3339(text: &str) -> Result<Timestamp, TimeError> {
    if let Some(ms) = plain_rfc3339_ms(text.as_bytes()) {
        return Ok(Timestamp::from_ms(ms));
    }
    if let Ok(ms) = text.parse::<i64>() {
        return Ok(Timestamp::from_ms(ms));
    }
    DateTime::parse_from_rfc3339(text)
        .map(|time| Timestamp::from_ms(time.timestamp_millis()))
        .map_err(|_| TimeError::UnreadableStamp {
            text: text.to_owned(),
        })
}

/// RFC 3339 in UTC with milliseconds, `2026-03-02T09:14:00.000Z`. Outside the years 0 to 9999, which RFC 3339 cannot write, the plain
/// milliseconds since 1970: [`epoch_or_rfc3339`] reads both.
pub fn rfc3339_ms(t: Timestamp) -> String {
    if (YEAR_0_MS..YEAR_10000_MS).contains(&t.ms())
        && let Some(time) = DateTime::<Utc>::from_timestamp_millis(t.ms())
    {
        time.to_rfc3339_opts(SecondsFormat::Millis, true)
    } else {
        t.ms().to_string()
    }
}

/// The site's wall clock, for people: `2026-03-02 09:14`.
pub fn local(t: Timestamp, zone: Tz) -> String {
    shown(t, zone, "%Y-%m-%d %H:%M")
}

/// The site's wall clock with the zone's abbreviation, for people far away: `2026-03-02 09:14 AST`.
pub fn local_with_zone(t: Timestamp, zone: Tz) -> String {
    shown(t, zone, "%Y-%m-%d %H:%M %Z")
}

/// A duration: figures with `d`, `h`, `m`, `s`, `ms`, largest first, each at most once: `90s`, `1h30m`, `500ms`.
///
/// # Errors
/// [`DurationError`], also when it is longer than 292 million years.
pub fn parse_duration(text: &str) -> Result<Duration, DurationError> {
    duration_ms(text)
        .map(Duration::from_millis)
        .ok_or_else(|| DurationError {
            text: text.to_owned(),
        })
}

/// A duration as [`parse_duration`] reads it, to the millisecond: `1h30m`, `500ms`, `0s`.
pub fn duration_text(duration: Duration) -> String {
    let mut left = duration.as_millis();
    let parts = UNITS.map(|(unit, ms)| {
        let n = left / u128::from(ms);
        left %= u128::from(ms);
        if n > 0 {
            format!("{n}{unit}")
        } else {
            String::new()
        }
    });
    let text = parts.concat();
    if text.is_empty() {
        "0s".to_owned()
    } else {
        text
    }
}

/// Units of a duration with their milliseconds, largest first.
const UNITS: [(&str, u64); 5] = [
    ("d", 86_400_000),
    ("h", 3_600_000),
    ("m", 60_000),
    ("s", 1_000),
    ("ms", 1),
];

/// 0000-01-01T00:00:00Z in milliseconds since 1970.
const YEAR_0_MS: i64 = -62_167_219_200_000;
/// 10000-01-01T00:00:00Z in milliseconds since 1970.
const YEAR_10000_MS: i64 = 253_402_300_800_000;

fn duration_ms(text: &str) -> Option<u64> {
    let mut rest = text;
    let mut units = UNITS.iter();
    let mut total = 0_u64;
    while !rest.is_empty() {
        let digits = rest.bytes().take_while(u8::is_ascii_digit).count();
        let (figure, behind) = rest.split_at_checked(digits)?;
        let letters = behind.bytes().take_while(u8::is_ascii_alphabetic).count();
        let (unit, behind) = behind.split_at_checked(letters)?;
        // The iterator goes on where it stood, so a unit out of order or twice is not found.
        let (_, ms) = units.find(|(known, _)| *known == unit)?;
        total = total.checked_add(figure.parse::<u64>().ok()?.checked_mul(*ms)?)?;
        rest = behind;
    }
    (!text.is_empty() && i64::try_from(total).is_ok()).then_some(total)
}

fn whole_ms(duration: Duration) -> i64 {
    i64::try_from(duration.as_millis()).unwrap_or(i64::MAX)
}

fn stamp<Z: TimeZone>(time: &DateTime<Z>) -> Timestamp {
    Timestamp::from_ms(time.timestamp_millis())
}

fn offset_text(time: &DateTime<Tz>) -> String {
    time.fixed_offset()
        .to_rfc3339_opts(SecondsFormat::AutoSi, true)
}

fn skipped(text: &str, local: NaiveDateTime, zone: Tz) -> Option<TimeError> {
    let gap = GapInfo::new(&local, &zone)?;
    let (_, before) = gap.begin?;
    let after = gap.end?.offset().fix();
    let read = |offset: chrono::FixedOffset| {
        let moment = offset.from_local_datetime(&local).single()?;
        Some(offset_text(&moment.with_timezone(&zone)))
    };
    Some(TimeError::Skipped {
        text: text.to_owned(),
        zone,
        earlier: read(after)?,
        later: read(before.fix())?,
    })
}

/// The first moment of a day in a zone; where midnight was skipped, the end of the gap.
fn first_moment(day: NaiveDate, zone: Tz) -> Timestamp {
    let midnight = day.and_time(NaiveTime::MIN);
    match zone.from_local_datetime(&midnight) {
        LocalResult::Single(time) | LocalResult::Ambiguous(time, _) => stamp(&time),
        LocalResult::None => GapInfo::new(&midnight, &zone)
            .and_then(|gap| gap.end)
            .map_or_else(|| stamp(&midnight.and_utc()), |end| stamp(&end)),
    }
}

fn shown(t: Timestamp, zone: Tz, shape: &str) -> String {
    match zone.timestamp_millis_opt(t.ms()) {
        LocalResult::Single(time) => time.format(shape).to_string(),
        // Beyond what the calendar reaches.
        LocalResult::Ambiguous(..) | LocalResult::None => rfc3339_ms(t),
    }
}

/// Milliseconds of `YYYY-MM-DDTHH:MM:SS[.fraction](Z|±HH:MM)`, or `None` for everything else, however good: an import reads a
/// million of these a second, and the calendar library is too slow for it.
fn plain_rfc3339_ms(text: &[u8]) -> Option<i64> {
    let (clock, rest) = text.split_first_chunk::<19>()?;
    if [clock[4], clock[7], clock[13], clock[16]] != *b"--::" || clock[10] != b'T' {
        return None;
    }
    let year = two(clock[0], clock[1])? * 100 + two(clock[2], clock[3])?;
    let month = two(clock[5], clock[6])?;
    let day = two(clock[8], clock[9])?;
    let (hour, minute, second) = (
        two(clock[11], clock[12])?,
        two(clock[14], clock[15])?,
        two(clock[17], clock[18])?,
    );
    if hour > 23 || minute > 59 || second > 59 || day < 1 || day > days_in_month(year, month)? {
        return None;
    }
    let (fraction_ms, zone) = fraction(rest)?;
    let offset_minutes = match *zone {
        [b'Z'] => 0,
        [sign @ (b'+' | b'-'), h1, h0, b':', m1, m0] => {
            let (hours, minutes) = (two(h1, h0)?, two(m1, m0)?);
            if hours > 23 || minutes > 59 {
                return None;
            }
            let offset = hours * 60 + minutes;
            if sign == b'-' { -offset } else { offset }
        }
        _ => return None,
    };
    let minutes = (days_since_1970(year, month, day) * 24 + hour) * 60 + minute - offset_minutes;
    Some((minutes * 60 + second) * 1_000 + fraction_ms)
}

/// The fraction in whole milliseconds, and what stands behind it.
fn fraction(text: &[u8]) -> Option<(i64, &[u8])> {
    let Some((b'.', rest)) = text.split_first() else {
        return Some((0, text));
    };
    let digits = rest.iter().take_while(|b| b.is_ascii_digit()).count();
    let (figures, zone) = rest.split_at_checked(digits)?;
    let place = |n: usize| figures.get(n).map_or(0, |b| i64::from(b - b'0'));
    (1..=9)
        .contains(&digits)
        .then_some((place(0) * 100 + place(1) * 10 + place(2), zone))
}

fn two(tens: u8, ones: u8) -> Option<i64> {
    (tens.is_ascii_digit() && ones.is_ascii_digit())
        .then(|| i64::from(tens - b'0') * 10 + i64::from(ones - b'0'))
}

fn days_in_month(year: i64, month: i64) -> Option<i64> {
    match month {
        1 | 3 | 5 | 7 | 8 | 10 | 12 => Some(31),
        4 | 6 | 9 | 11 => Some(30),
        2 if (year % 4 == 0 && year % 100 != 0) || year % 400 == 0 => Some(29),
        2 => Some(28),
        _ => None,
    }
}

/// Days from 1970-01-01 in the Gregorian calendar, years 0 to 9999. The year is counted from March, so that the leap day ends it.
fn days_since_1970(year: i64, month: i64, day: i64) -> i64 {
    let (year, month) = if month > 2 {
        (year, month - 3)
    } else {
        (year - 1, month + 9)
    };
    let leap_days = year.div_euclid(4) - year.div_euclid(100) + year.div_euclid(400);
    // (153·m + 2)/5 is the number of days before the m-th month from March: 0, 31, 61, 92, …
    365 * year + leap_days + (153 * month + 2) / 5 + day - 1 - 719_468
}

#[cfg(test)]
mod tests;
