//! # Import: many rows from elsewhere, each kept once
//!
//! in: judged readings in chunks, in the order of the file. out: how many were kept, were there already, disagree.
//! A row is *repeated* when its point, time, mV and °C are those of a row already there, from this import or before.

use super::error::LedgerError;
use super::row::PointId;
use super::store::{Ledger, Newest, append_to};
use crate::watch::reading::{Reading, mv_steps, temp_c_steps};
use rusqlite::{CachedStatement, Transaction, params};
use std::collections::HashMap;
use std::collections::hash_map::Entry;

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
    /// Imports `rows` and says what became of them. Call it chunk by chunk: nothing is kept in memory between calls.
    ///
    /// # Errors
    /// What the database says; up to some 20 000 rows before may be in then, and importing the same file again skips them.
    pub fn import(&mut self, rows: &[(PointId, Reading)]) -> Result<Imported, LedgerError> {
        let path = self.path().to_path_buf();
        let mut imported = Imported::default();
        for chunk in rows.chunks(ROWS_PER_TRANSACTION) {
            let transaction = self.begin()?;
            let (keep, chunk) = sift(&transaction, chunk)
                .map_err(|source| LedgerError::of(&path, "look for repeated rows", source))?;
            append_to(&transaction, &path, &keep, &[], Newest::LastInTime)?;
            transaction
                .commit()
                .map_err(|source| LedgerError::of(&path, "commit imported rows", source))?;
            imported.kept += chunk.kept;
            imported.repeated += chunk.repeated;
            imported.conflicting += chunk.conflicting;
        }
        Ok(imported)
    }
}

/// Raw figures as stored.
type Raw = (Option<i64>, Option<i64>);

/// The rows to keep. The whole chunk is looked at before the first is inserted, so rows of the chunk itself are remembered here.
fn sift(
    transaction: &Transaction<'_>,
    chunk: &[(PointId, Reading)],
) -> rusqlite::Result<(Vec<(PointId, Reading)>, Imported)> {
    let mut there = transaction
        .prepare_cached("SELECT mv_uv, temp_mc FROM reading WHERE point_id = ? AND t_ms = ?")?;
    let mut last =
        transaction.prepare_cached("SELECT max(t_ms) FROM reading WHERE point_id = ?")?;
    let mut ends: HashMap<PointId, Option<i64>> = HashMap::new();
    let mut known: HashMap<(PointId, i64), Vec<Raw>> = HashMap::with_capacity(chunk.len());
    let mut keep = Vec::with_capacity(chunk.len());
    let mut imported = Imported::default();
    for (point, reading) in chunk {
        let t_ms = reading.at.ms();
        let raw = (
            reading.mv.and_then(mv_steps),
            reading.temp_c.and_then(temp_c_steps),
        );
        let same_time = match known.entry((*point, t_ms)) {
            Entry::Occupied(same_time) => same_time.into_mut(),
            Entry::Vacant(free) => {
                let end = if let Some(end) = ends.get(point) {
                    *end
                } else {
                    let end = last.query_row([point.id], |row| row.get(0))?;
                    ends.insert(*point, end);
                    end
                };
                // Rows newer than all that is there, the usual case, need no search.
                free.insert(match end {
                    Some(end) if t_ms <= end => raws(&mut there, *point, t_ms)?,
                    _ => Vec::new(),
                })
            }
        };
        if same_time.contains(&raw) {
            imported.repeated += 1;
            continue;
        }
        if !same_time.is_empty() {
            imported.conflicting += 1;
        }
        same_time.push(raw);
        imported.kept += 1;
        keep.push((*point, *reading));
    }
    Ok((keep, imported))
}

fn raws(
    statement: &mut CachedStatement<'_>,
    point: PointId,
    t_ms: i64,
) -> rusqlite::Result<Vec<Raw>> {
    statement
        .query_map(params![point.id, t_ms], |row| {
            Ok((row.get(0)?, row.get(1)?))
        })?
        .collect()
}
