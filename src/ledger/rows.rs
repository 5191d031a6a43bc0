//! # Rows of a point by time, wherever they lie
//!
//! Rows up to a point's marker are read from `sealed`, those behind it from `reading`. Only short transactions: the marker of
//! the first holds for the whole call, for sealed parts never change, and what is sealed meanwhile begins behind it.

use super::codec::{self, CODEC, Packed, Rows, SEQ, TIME};
use super::error::LedgerError;
use super::rollup::HOUR_MS;
use super::row;
use rusqlite::{Connection, OptionalExtension, params};
use sha2::{Digest, Sha256};
use std::collections::BTreeMap;
use std::ops::{ControlFlow, Range};
use std::path::Path;

/// Where a point's rows lie at one moment.
#[derive(Debug, Clone, Copy)]
pub(super) struct Marker {
    /// Rows up to this number lie in `sealed`.
    pub(super) sealed_to: i64,
    /// No row behind it is earlier; `None` when there is none.
    pub(super) t_open: Option<i64>,
}

/// One point of a ledger.
#[derive(Debug, Clone, Copy)]
pub(super) struct At<'a> {
    pub(super) connection: &'a Connection,
    pub(super) path: &'a Path,
    pub(super) point: i64,
}

impl At<'_> {
    fn failed(&self) -> impl Fn(rusqlite::Error) -> LedgerError {
        |source| LedgerError::of(self.path, "read readings", source)
    }

    /// The marker; `None` when the point has no rows.
    pub(super) fn marker(&self) -> Result<Option<Marker>, LedgerError> {
        let read = || {
            self.connection
                .prepare_cached("SELECT sealed_to, t_open FROM point_state WHERE point_id = ?")?
                .query_row([self.point], |row| {
                    Ok(Marker {
                        sealed_to: row.get(0)?,
                        t_open: row.get(1)?,
                    })
                })
                .optional()
        };
        read().map_err(self.failed())
    }

    /// Rows that are not sealed, of the given times, in order of arrival.
    pub(super) fn open(
        &self,
        marker: Marker,
        span: &Range<i64>,
    ) -> Result<Vec<Packed>, LedgerError> {
        if marker.t_open.is_none_or(|t_open| t_open >= span.end) {
            return Ok(Vec::new());
        }
        let read = || -> rusqlite::Result<Vec<Packed>> {
            self.connection
                .prepare_cached(concat!(
                    "SELECT ",
                    row::columns!(),
                    " FROM reading WHERE seq > ? AND point_id = ? AND t_ms >= ? AND t_ms < ? ORDER BY seq"
                ))?
                .query_map(
                    params![marker.sealed_to, self.point, span.start, span.end],
                    |row| row::read(row, 0),
                )?
                .collect()
        };
        read().map_err(self.failed())
    }

    /// Decodes the sealed parts of `hour` that lie before the marker, each handed to `each`.
    pub(super) fn sealed(
        &self,
        marker: Marker,
        hour: i64,
        rows: &mut Rows,
        mut each: impl FnMut(&mut Rows),
    ) -> Result<(), LedgerError> {
        let mut statement = self
            .connection
            .prepare_cached(
                "SELECT id, n, codec, data, sha256 FROM sealed
                 WHERE point_id = ? AND hour = ? AND seq_lo <= ? ORDER BY part",
            )
            .map_err(self.failed())?;
        let mut parts = statement
            .query(params![self.point, hour, marker.sealed_to])
            .map_err(self.failed())?;
        while let Some(part) = parts.next().map_err(self.failed())? {
            decode(self.path, part, rows)?;
            each(rows);
        }
        Ok(())
    }

    /// The first hour from `hour` on that has sealed rows.
    fn next_sealed_hour(&self, hour: i64) -> Result<Option<i64>, LedgerError> {
        self.connection
            .prepare_cached("SELECT min(hour) FROM sealed WHERE point_id = ? AND hour >= ?")
            .and_then(|mut statement| statement.query_row([self.point, hour], |row| row.get(0)))
            .map_err(self.failed())
    }

    /// Gives `each` the rows of the given times, by time, then by sequence, until it breaks.
    pub(super) fn walk(
        &self,
        span: &Range<i64>,
        mut each: impl FnMut(&Packed) -> ControlFlow<()>,
    ) -> Result<(), LedgerError> {
        // Marker and open rows belong together.
        let snapshot = self
            .connection
            .unchecked_transaction()
            .map_err(self.failed())?;
        let Some(marker) = self.marker()? else {
            return Ok(());
        };
        let mut open: BTreeMap<i64, Vec<Packed>> = BTreeMap::new();
        for packed in self.open(marker, span)? {
            let hour = packed[TIME].div_euclid(HOUR_MS);
            open.entry(hour).or_default().push(packed);
        }
        snapshot.finish().map_err(self.failed())?;
        let mut next = span.start.div_euclid(HOUR_MS);
        let (mut rows, mut mixed) = (Rows::default(), Vec::new());
        loop {
            let sealed = self.next_sealed_hour(next)?;
            let first_open = open.first_key_value().map(|(hour, _)| *hour);
            let Some(hour) = [sealed, first_open].into_iter().flatten().min() else {
                return Ok(());
            };
            if hour.saturating_mul(HOUR_MS) >= span.end {
                return Ok(());
            }
            // The usual hour is one part in order of time and goes out as it comes in.
            let mut n_parts = 0;
            let mut straight = Rows::default();
            self.sealed(marker, hour, &mut rows, |rows| {
                n_parts += 1;
                if n_parts == 1 && rows.column(TIME).is_sorted() {
                    std::mem::swap(rows, &mut straight);
                } else {
                    mixed.extend(rows.iter());
                }
            })?;
            let late = open.remove(&hour).unwrap_or_default();
            let given = if mixed.is_empty() && late.is_empty() {
                give(straight.iter(), span, &mut each)
            } else {
                mixed.extend(straight.iter());
                mixed.extend(late);
                mixed.sort_unstable_by_key(|row| (row[TIME], row[SEQ]));
                let given = give(mixed.iter().copied(), span, &mut each);
                mixed.clear();
                given
            };
            if given.is_break() {
                return Ok(());
            }
            std::mem::swap(&mut rows, &mut straight);
            next = hour + 1;
        }
    }

    /// The last row in time at or before `t_ms`; of several at that time the last to arrive.
    pub(super) fn newest(&self, t_ms: i64) -> Result<Option<Packed>, LedgerError> {
        let snapshot = self
            .connection
            .unchecked_transaction()
            .map_err(self.failed())?;
        let Some(marker) = self.marker()? else {
            return Ok(None);
        };
        let later = |best: Option<Packed>, row: Packed| {
            if row[TIME] > t_ms {
                return best;
            }
            match best {
                Some(best) if (best[TIME], best[SEQ]) > (row[TIME], row[SEQ]) => Some(best),
                _ => Some(row),
            }
        };
        let hour: Option<i64> = self
            .connection
            .prepare_cached(
                "SELECT hour FROM sealed WHERE point_id = ? AND hour <= ? AND t_lo <= ? ORDER BY hour DESC LIMIT 1",
            )
            .and_then(|mut statement| {
                statement
                    .query_row(params![self.point, t_ms.div_euclid(HOUR_MS), t_ms], |row| {
                        row.get(0)
                    })
                    .optional()
            })
            .map_err(self.failed())?;
        let mut best = None;
        if let Some(hour) = hour {
            self.sealed(marker, hour, &mut Rows::default(), |rows| {
                best = rows.iter().fold(best, later);
            })?;
        }
        let end = t_ms.saturating_add(1);
        let from = best.map_or(i64::MIN, |best: Packed| best[TIME]);
        best = self
            .open(marker, &(from..end))?
            .into_iter()
            .fold(best, later);
        snapshot.finish().map_err(self.failed())?;
        Ok(best)
    }
}

fn give(
    rows: impl Iterator<Item = Packed>,
    span: &Range<i64>,
    each: &mut impl FnMut(&Packed) -> ControlFlow<()>,
) -> ControlFlow<()> {
    for row in rows {
        if span.contains(&row[TIME]) {
            each(&row)?;
        }
    }
    ControlFlow::Continue(())
}

/// Decodes a part, read as id, n, codec, data, sha256, and holds it against its hash.
pub(super) fn decode(
    path: &Path,
    part: &rusqlite::Row<'_>,
    rows: &mut Rows,
) -> Result<(), LedgerError> {
    let failed = |source: rusqlite::Error| LedgerError::of(path, "read a sealed hour", source);
    let id: i64 = part.get(0).map_err(failed)?;
    let damaged = |what: String| LedgerError::DamagedPart {
        id,
        path: path.to_path_buf(),
        what,
    };
    let n: i64 = part.get(1).map_err(failed)?;
    let codec: i64 = part.get(2).map_err(failed)?;
    let data = part.get_ref(3).map_err(failed)?.as_blob();
    let data = data.map_err(|error| damaged(error.to_string()))?;
    let sha256: [u8; 32] = part.get(4).map_err(failed)?;
    if codec != CODEC {
        return Err(damaged(format!("its layout {codec} is not known")));
    }
    if <[u8; 32]>::from(Sha256::digest(data)) != sha256 {
        return Err(damaged("it does not match its hash".to_owned()));
    }
    let n = usize::try_from(n).unwrap_or(0);
    codec::decode(data, n, rows).map_err(|broken| damaged(broken.to_string()))
}
