//! # The newest state of each line: one small row, replaced; no record and no part of the chain

use super::error::LedgerError;
use crate::electrode::units::Timestamp;
use rusqlite::{Connection, Transaction, params};
use std::path::Path;

/// What a line's task last said of itself.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct LineState {
    /// The line's name.
    pub line: String,
    /// When it was said.
    pub at: Timestamp,
    /// Its counts, JSON; what stands in it is the writer's and the reader's affair.
    pub body: String,
}

/// Replaces the state of these lines, in order.
pub(super) fn replace(
    transaction: &Transaction<'_>,
    path: &Path,
    states: &[LineState],
) -> Result<(), LedgerError> {
    let write = || -> rusqlite::Result<()> {
        let mut upsert = transaction.prepare_cached(
            "INSERT OR REPLACE INTO line_state(line, t_ms, body) VALUES (?, ?, ?)",
        )?;
        for state in states {
            upsert.execute(params![state.line, state.at.ms(), state.body])?;
        }
        Ok(())
    };
    write().map_err(|source| LedgerError::of(path, "keep the state of the lines", source))
}

/// All of them, by name.
pub(super) fn all(connection: &Connection) -> rusqlite::Result<Vec<LineState>> {
    connection
        .prepare_cached("SELECT line, t_ms, body FROM line_state ORDER BY line")?
        .query_map([], |row| {
            Ok(LineState {
                line: row.get(0)?,
                at: Timestamp::from_ms(row.get(1)?),
                body: row.get(2)?,
            })
        })?
        .collect()
}
