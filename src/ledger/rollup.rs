//! # Roll-ups: per minute and hour of a point, written when it is sealed

use super::codec::{FLAGS, NONE, Rows, TIME, U, VALUE};
use rusqlite::{Connection, params};

pub(super) const MINUTE_MS: i64 = 60_000;
pub(super) const HOUR_MS: i64 = 3_600_000;

/// What a bucket holds, in stored steps.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) struct Rollup {
    /// Rows with a value.
    pub(super) n: i64,
    pub(super) lo: Option<i64>,
    pub(super) hi: Option<i64>,
    pub(super) total: i64,
    pub(super) u_hi: Option<i64>,
    /// The worst flag of all rows.
    pub(super) flag_hi: i64,
}

impl Rollup {
    pub(super) const EMPTY: Self = Self {
        n: 0,
        lo: None,
        hi: None,
        total: 0,
        u_hi: None,
        flag_hi: 0,
    };

    pub(super) fn add(&mut self, value: i64, u: i64, flags: i64) {
        let there = |figure: i64| (figure != NONE).then_some(figure);
        let is_there = there(value).is_some();
        self.merge(&Self {
            n: i64::from(is_there),
            lo: there(value),
            hi: there(value),
            total: there(value).unwrap_or(0),
            u_hi: there(u).filter(|_| is_there),
            flag_hi: flags & 0xf,
        });
    }

    pub(super) fn merge(&mut self, more: &Self) {
        self.n += more.n;
        self.lo = [self.lo, more.lo].into_iter().flatten().min();
        self.hi = self.hi.max(more.hi);
        self.total = self.total.saturating_add(more.total);
        self.u_hi = self.u_hi.max(more.u_hi);
        self.flag_hi = self.flag_hi.max(more.flag_hi);
    }
}

/// The roll-ups of `rows` by bucket of `width_ms`; a bucket may come more than once when time steps back.
pub(super) fn of(rows: &Rows, width_ms: i64) -> Vec<(i64, Rollup)> {
    let mut buckets: Vec<(i64, Rollup)> = Vec::new();
    let figures = rows.column(VALUE).iter().zip(rows.column(U));
    for (t_ms, ((value, u), flags)) in rows
        .column(TIME)
        .iter()
        .zip(figures.zip(rows.column(FLAGS)))
    {
        let bucket = t_ms.div_euclid(width_ms);
        match buckets.last_mut() {
            Some((last, rollup)) if *last == bucket => rollup.add(*value, *u, *flags),
            _ => {
                let mut rollup = Rollup::EMPTY;
                rollup.add(*value, *u, *flags);
                buckets.push((bucket, rollup));
            }
        }
    }
    buckets
}

macro_rules! upsert {
    ($table:literal) => {
        concat!(
            "INSERT INTO ",
            $table,
            "(point_id, bucket, n, lo, hi, total, u_hi, flag_hi) VALUES (?1, ?2, ?3, ?4, ?5, ?6, ?7, ?8)
             ON CONFLICT(point_id, bucket) DO UPDATE SET
               n = n + ?3,
               lo = min(coalesce(lo, ?4), coalesce(?4, lo)),
               hi = max(coalesce(hi, ?5), coalesce(?5, hi)),
               total = total + ?6,
               u_hi = max(coalesce(u_hi, ?7), coalesce(?7, u_hi)),
               flag_hi = max(flag_hi, ?8)"
        )
    };
}

/// Adds what `rows` say to the roll-ups that are there: a later part of an hour adds to the earlier ones.
pub(super) fn add(connection: &Connection, point: i64, rows: &Rows) -> rusqlite::Result<()> {
    for (sql, width_ms) in [(upsert!("minute"), MINUTE_MS), (upsert!("hour"), HOUR_MS)] {
        let mut statement = connection.prepare_cached(sql)?;
        for (bucket, r) in of(rows, width_ms) {
            statement.execute(params![
                point, bucket, r.n, r.lo, r.hi, r.total, r.u_hi, r.flag_hi
            ])?;
        }
    }
    Ok(())
}
