//! # Import: many rows from elsewhere, each kept once
//!
//! in: judged readings in chunks, in the order of the file. out: how many were kept, were there already, disagree.
//! A row is *repeated* when its point, time, mV and °C are those of a row already there, from this import or before.

use super::codec::{MV, NONE, Packed, Rows, TEMP, TIME};
use super::error::LedgerError;
use super::rollup::HOUR_MS;
use super::row::PointId;
use super::rows::{At, Marker};
use super::seal::Cut;
use super::store::{Ledger, Newest, append_to};
use crate::electrode::units::Timestamp;
use crate::watch::reading::{Reading, mv_steps, temp_c_steps};
use rusqlite::Transaction;
use std::collections::BTreeMap;
use std::path::Path;

/// Rows per transaction: some tens of milliseconds, so that the daemon's commits pass in between.
const ROWS_PER_TRANSACTION: usize = 20_000;

/// What became of imported rows.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub struct Imported {
    /// Rows kept, conflicting ones too.
    pub kept: u64,
    /// Rows already there, skipped.
    pub repeated: u64,
    /// Rows kept though a row of the same point and time has other figures.
    pub conflicting: u64,
}

impl Ledger {
    /// Imports `rows` at the time `now` and says what became of them. Call it chunk by chunk: nothing is kept in memory between calls,
    /// and what has piled up is sealed on the way. Call [`Ledger::seal_all`] after the last chunk.
    ///
    /// # Errors
    /// What the database says; up to some 20 000 rows before may be in then, and importing the same file again skips them.
    pub fn import(
        &mut self,
        rows: &[(PointId, Reading)],
        now: Timestamp,
    ) -> Result<Imported, LedgerError> {
        let path = self.path().to_path_buf();
        let mut imported = Imported::default();
        for chunk in rows.chunks(ROWS_PER_TRANSACTION) {
            let transaction = self.begin()?;
            let (keep, chunk) = sift(&transaction, &path, chunk)?;
            append_to(&transaction, &path, &keep, &[], Newest::LastInTime)?;
            transaction
                .commit()
                .map_err(|source| LedgerError::of(&path, "commit imported rows", source))?;
            imported.kept += chunk.kept;
            imported.repeated += chunk.repeated;
            imported.conflicting += chunk.conflicting;
            self.seal(Cut::Backlog, now)?;
        }
        Ok(imported)
    }
}

/// Raw figures as stored.
type Raw = (i64, i64);

/// A row of the chunk with what it is compared by.
struct Candidate {
    t_ms: i64,
    raw: Raw,
    at: usize,
}

/// The rows to keep, in the order of the file. Each hour is looked up once, for all rows of the chunk that fall into it.
fn sift(
    transaction: &Transaction<'_>,
    path: &Path,
    chunk: &[(PointId, Reading)],
) -> Result<(Vec<(PointId, Reading)>, Imported), LedgerError> {
    let mut hours: BTreeMap<(PointId, i64), Vec<Candidate>> = BTreeMap::new();
    for (at, (point, reading)) in chunk.iter().enumerate() {
        let t_ms = reading.at.ms();
        let steps = |figure: Option<i64>| figure.unwrap_or(NONE);
        let candidate = Candidate {
            t_ms,
            raw: (
                steps(reading.mv.and_then(mv_steps)),
                steps(reading.temp_c.and_then(temp_c_steps)),
            ),
            at,
        };
        hours
            .entry((*point, t_ms.div_euclid(HOUR_MS)))
            .or_default()
            .push(candidate);
    }
    let mut imported = Imported::default();
    let mut is_kept = vec![false; chunk.len()];
    let mut there = There::default();
    for ((point, hour), mut candidates) in hours {
        let at = At {
            connection: transaction,
            path,
            point: point.id,
        };
        there.look_up(&at, hour, &candidates)?;
        candidates.sort_by_key(|candidate| (candidate.t_ms, candidate.at));
        for candidate in candidates {
            match there.enter(candidate.t_ms, candidate.raw) {
                Seen::Repeated => imported.repeated += 1,
                seen => {
                    imported.kept += 1;
                    imported.conflicting += u64::from(seen == Seen::Conflicting);
                    is_kept[candidate.at] = true;
                }
            }
        }
    }
    let kept = chunk.iter().zip(is_kept);
    let kept = kept
        .filter_map(|(row, keep)| keep.then_some(*row))
        .collect();
    Ok((kept, imported))
}

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Seen {
    New,
    Conflicting,
    Repeated,
}

/// The rows of an hour that are there, by time, and the candidates of one time that were entered last.
#[derive(Default)]
struct There {
    point: Option<(i64, Option<Known>)>,
    rows: Rows,
    known: Vec<(i64, Raw)>,
    now: (i64, Vec<Raw>),
    next: usize,
}

/// What is known of a point's rows before its hours are looked at.
#[derive(Debug, Clone)]
struct Known {
    marker: Marker,
    t_max: i64,
    /// Rows that are not sealed, once they were asked for.
    open: Option<Vec<Packed>>,
}

impl There {
    /// Looks up what is there at the times of `candidates`.
    fn look_up(
        &mut self,
        at: &At<'_>,
        hour: i64,
        candidates: &[Candidate],
    ) -> Result<(), LedgerError> {
        self.known.clear();
        self.now = (i64::MIN, Vec::new());
        self.next = 0;
        if self
            .point
            .as_ref()
            .is_none_or(|(point, _)| *point != at.point)
        {
            self.point = Some((at.point, known(at)?));
        }
        let Some((_, Some(known))) = &mut self.point else {
            return Ok(());
        };
        // Rows later than all that is there, the usual case, need no search.
        if candidates
            .iter()
            .all(|candidate| candidate.t_ms > known.t_max)
        {
            return Ok(());
        }
        let there = &mut self.known;
        at.sealed(known.marker, hour, &mut self.rows, |rows| {
            there.extend(rows.iter().map(|row| (row[TIME], (row[MV], row[TEMP]))));
        })?;
        if known
            .marker
            .t_open
            .is_some_and(|t_open| t_open < (hour + 1) * HOUR_MS)
        {
            let open = match known.open.take() {
                Some(open) => open,
                None => at.open(known.marker, &(i64::MIN..i64::MAX))?,
            };
            let of_hour = open
                .iter()
                .filter(|row| row[TIME].div_euclid(HOUR_MS) == hour);
            there.extend(of_hour.map(|row| (row[TIME], (row[MV], row[TEMP]))));
            known.open = Some(open);
        }
        if !there.is_sorted_by_key(|(t_ms, _)| *t_ms) {
            there.sort_unstable_by_key(|(t_ms, _)| *t_ms);
        }
        Ok(())
    }

    /// Enters a candidate; they come by time.
    fn enter(&mut self, t_ms: i64, raw: Raw) -> Seen {
        if self.now.0 != t_ms {
            self.now.0 = t_ms;
            self.now.1.clear();
            while self.known.get(self.next).is_some_and(|(t, _)| *t < t_ms) {
                self.next += 1;
            }
            while let Some((_, raw)) = self.known.get(self.next).filter(|(t, _)| *t == t_ms) {
                self.now.1.push(*raw);
                self.next += 1;
            }
        }
        let same_time = &mut self.now.1;
        if same_time.contains(&raw) {
            return Seen::Repeated;
        }
        let is_first = same_time.is_empty();
        same_time.push(raw);
        if is_first {
            Seen::New
        } else {
            Seen::Conflicting
        }
    }
}

fn known(at: &At<'_>) -> Result<Option<Known>, LedgerError> {
    let Some(marker) = at.marker()? else {
        return Ok(None);
    };
    let t_max = at
        .connection
        .prepare_cached("SELECT t_max FROM point_state WHERE point_id = ?")
        .and_then(|mut statement| statement.query_row([at.point], |row| row.get(0)))
        .map_err(|source| LedgerError::of(at.path, "look for repeated rows", source))?;
    Ok(Some(Known {
        marker,
        t_max,
        open: None,
    }))
}
