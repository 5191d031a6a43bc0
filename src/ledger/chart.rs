//! # Charts: a span of a point in buckets, from the finest roll-up that still gives them

use super::codec::{FLAGS, Packed, TIME, U, VALUE};
use super::error::LedgerError;
use super::rollup::{HOUR_MS, MINUTE_MS, Rollup};
use super::rows::At;
use crate::electrode::history::ProbeKind;
use crate::electrode::units::Timestamp;
use crate::watch::flags::Flag;
use crate::watch::reading::{u_from_steps, value_from_steps};
use rusqlite::params;
use std::ops::{ControlFlow, Range};

/// What a point said in a stretch of time.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Bucket {
    /// Its beginning; it ends where the next begins.
    pub from: Timestamp,
    /// Readings with a value.
    pub n: u64,
    /// The lowest value.
    pub lo: Option<f64>,
    /// The highest value.
    pub hi: Option<f64>,
    /// The mean of the values.
    pub mean: Option<f64>,
    /// The largest u of the values.
    pub u_hi: Option<f64>,
    /// The worst flag of all readings; none when there is no reading.
    pub flag: Option<Flag>,
}

/// `n` buckets over `span`.
pub(super) fn chart(
    at: &At<'_>,
    kind: ProbeKind,
    span: &Range<i64>,
    n: u32,
) -> Result<Vec<Bucket>, LedgerError> {
    let (n, length) = (i64::from(n.max(1)), span.end.saturating_sub(span.start));
    if length <= 0 {
        return Ok(Vec::new());
    }
    let mut rollups = vec![Rollup::EMPTY; usize::try_from(n).unwrap_or(0)];
    let mut add = |t_ms: i64, rollup: &Rollup| {
        let place =
            i128::from(t_ms.max(span.start) - span.start) * i128::from(n) / i128::from(length);
        if let Some(bucket) = usize::try_from(place).ok().and_then(|p| rollups.get_mut(p)) {
            bucket.merge(rollup);
        }
    };
    let add_row = |row: &Packed, add: &mut dyn FnMut(i64, &Rollup)| {
        let mut one = Rollup::EMPTY;
        one.add(row[VALUE], row[U], row[FLAGS]);
        add(row[TIME], &one);
    };
    let width_ms = length / n;
    if width_ms < MINUTE_MS {
        at.walk(span, |row| {
            add_row(row, &mut add);
            ControlFlow::Continue(())
        })?;
    } else {
        let failed = |source| LedgerError::of(at.path, "read roll-ups", source);
        // Roll-ups and open rows belong together.
        let snapshot = at.connection.unchecked_transaction().map_err(failed)?;
        let (table, step_ms) = if width_ms < HOUR_MS {
            ("minute", MINUTE_MS)
        } else {
            ("hour", HOUR_MS)
        };
        let sql = format!(
            "SELECT bucket, n, lo, hi, total, u_hi, flag_hi FROM {table} WHERE point_id = ? AND bucket >= ? AND bucket < ?"
        );
        let first = span.start.div_euclid(step_ms);
        let end = span.end.saturating_add(step_ms - 1).div_euclid(step_ms);
        let mut statement = snapshot.prepare_cached(&sql).map_err(failed)?;
        let mut rows = statement
            .query(params![at.point, first, end])
            .map_err(failed)?;
        while let Some(row) = rows.next().map_err(failed)? {
            let read = || -> rusqlite::Result<(i64, Rollup)> {
                let rollup = Rollup {
                    n: row.get(1)?,
                    lo: row.get(2)?,
                    hi: row.get(3)?,
                    total: row.get(4)?,
                    u_hi: row.get(5)?,
                    flag_hi: row.get(6)?,
                };
                Ok((row.get::<_, i64>(0)? * step_ms, rollup))
            };
            let (t_ms, rollup) = read().map_err(failed)?;
            add(t_ms, &rollup);
        }
        if let Some(marker) = at.marker()? {
            for row in at.open(marker, span)? {
                add_row(&row, &mut add);
            }
        }
    }
    let buckets = (0_i64..).zip(&rollups);
    Ok(buckets
        .map(|(place, rollup)| {
            let from = i128::from(length) * i128::from(place) / i128::from(n);
            bucket(kind, span.start + i64::try_from(from).unwrap_or(0), rollup)
        })
        .collect())
}

#[expect(
    clippy::cast_precision_loss,
    reason = "sums and counts of stored steps are below 2^53"
)]
fn bucket(kind: ProbeKind, from_ms: i64, rollup: &Rollup) -> Bucket {
    let per_step = value_from_steps(kind, 1);
    Bucket {
        from: Timestamp::from_ms(from_ms),
        n: u64::try_from(rollup.n).unwrap_or(0),
        lo: rollup.lo.map(|lo| value_from_steps(kind, lo)),
        hi: rollup.hi.map(|hi| value_from_steps(kind, hi)),
        mean: (rollup.n > 0).then(|| rollup.total as f64 / rollup.n as f64 * per_step),
        u_hi: rollup.u_hi.map(u_from_steps),
        flag: u8::try_from(rollup.flag_hi)
            .ok()
            .filter(|number| *number > 0)
            .map(|number| Flag::try_from(number).unwrap_or(Flag::Fail)),
    }
}
