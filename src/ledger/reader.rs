//! # The ledger open for reading
//!
//! Short transactions only: a reader that keeps a snapshot stops the log from being reset.

use super::audit::{self, AuditReport};
use super::book;
use super::error::LedgerError;
use super::event::Event;
use super::line_state::{self, LineState};
use super::row::{self, PointId};
use super::schema;
use crate::electrode::history::{Book, EventId, Tag};
use crate::electrode::units::Timestamp;
use crate::watch::reading::Reading;
use rusqlite::{Connection, OptionalExtension, params};
use std::ops::ControlFlow;
use std::path::{Path, PathBuf};

const HOUR_MS: i64 = 3_600_000;

/// The ledger open for reading only.
#[derive(Debug)]
pub struct Reader {
    path: PathBuf,
    connection: Connection,
}

impl Reader {
    /// Opens the ledger at `path` to read.
    ///
    /// # Errors
    /// [`LedgerError`]: missing, no ledger, of another version, not readable.
    pub fn open(path: &Path) -> Result<Self, LedgerError> {
        Ok(Self {
            path: path.to_path_buf(),
            connection: schema::open_readable(path)?,
        })
    }

    /// The events after number `after`, in order.
    ///
    /// # Errors
    /// What the database says; [`LedgerError::UnreadableEvent`].
    pub fn events(&self, after: EventId) -> Result<Vec<Event>, LedgerError> {
        book::events(&self.connection, &self.path, after)
    }

    /// The book of every event that was so at or before `until`; of all without.
    ///
    /// # Errors
    /// As [`Reader::events`].
    pub fn book(&self, until: Option<Timestamp>) -> Result<Book, LedgerError> {
        book::book(&self.connection, &self.path, until)
    }

    /// A number that changes whenever another connection has committed.
    ///
    /// # Errors
    /// What the database says.
    pub fn data_version(&self) -> Result<i64, LedgerError> {
        self.connection
            .prepare_cached("PRAGMA data_version")
            .and_then(|mut statement| statement.query_row([], |row| row.get(0)))
            .map_err(self.at("look for changes"))
    }

    /// Every point, by tag.
    ///
    /// # Errors
    /// What the database says.
    pub fn points(&self) -> Result<Vec<(Tag, PointId)>, LedgerError> {
        let read = || -> rusqlite::Result<Vec<(String, i64, String)>> {
            self.connection
                .prepare_cached("SELECT tag, id, quantity FROM point ORDER BY tag")?
                .query_map([], |row| Ok((row.get(0)?, row.get(1)?, row.get(2)?)))?
                .collect()
        };
        let rows = read().map_err(self.at("read the points"))?;
        Ok(rows
            .into_iter()
            .filter_map(|(tag, id, quantity)| {
                Some((
                    Tag(tag),
                    PointId {
                        id,
                        kind: quantity.parse().ok()?,
                    },
                ))
            })
            .collect())
    }

    /// The newest reading of `point` and its sequence number; with `at`, the newest in time at or before it.
    ///
    /// Without `at` it is the last that arrived live, even when the clock stepped back; imported rows count when they are newer in time.
    ///
    /// # Errors
    /// What the database says.
    pub fn newest(
        &self,
        point: PointId,
        at: Option<Timestamp>,
    ) -> Result<Option<(i64, Reading)>, LedgerError> {
        let read = || {
            match at {
            None => self
                .connection
                .prepare_cached(concat!("SELECT ", row::columns!(), " FROM point_state WHERE point_id = ?"))?
                .query_row([point.id], |row| row::read(row, point.kind))
                .optional(),
            Some(at) => self
                .connection
                .prepare_cached(concat!(
                    "SELECT ",
                    row::columns!(),
                    " FROM reading WHERE point_id = ? AND t_ms <= ? ORDER BY t_ms DESC, seq DESC LIMIT 1"
                ))?
                .query_row([point.id, at.ms()], |row| row::read(row, point.kind))
                .optional(),
        }
        };
        read().map_err(self.at("read the newest reading"))
    }

    /// Gives `each` the readings of `point` from `from` up to before `to` with their sequence numbers: hour by hour, by sequence within the hour, until it breaks.
    ///
    /// # Errors
    /// What the database says.
    pub fn readings(
        &self,
        point: PointId,
        from: Timestamp,
        to: Timestamp,
        mut each: impl FnMut(i64, Reading) -> ControlFlow<()>,
    ) -> Result<(), LedgerError> {
        let mut from_ms = from.ms();
        while let Some(first) = self
            .first_at_or_after(point, from_ms)?
            .filter(|first| *first < to.ms())
        {
            let end = first
                .div_euclid(HOUR_MS)
                .saturating_add(1)
                .saturating_mul(HOUR_MS)
                .min(to.ms());
            for (seq, reading) in self.span(point, first, end)? {
                if each(seq, reading).is_break() {
                    return Ok(());
                }
            }
            from_ms = end;
        }
        Ok(())
    }

    /// The newest state of every line that a daemon has run, by name.
    ///
    /// # Errors
    /// What the database says.
    pub fn lines(&self) -> Result<Vec<LineState>, LedgerError> {
        line_state::all(&self.connection).map_err(self.at("read the state of the lines"))
    }

    /// What is broken in the chain of events and in the database, and where.
    ///
    /// # Errors
    /// When the database cannot be read at all.
    pub fn audit(&self) -> Result<AuditReport, LedgerError> {
        audit::audit(&self.connection).map_err(self.at("audit"))
    }

    fn first_at_or_after(&self, point: PointId, t_ms: i64) -> Result<Option<i64>, LedgerError> {
        self.connection
            .prepare_cached("SELECT min(t_ms) FROM reading WHERE point_id = ? AND t_ms >= ?")
            .and_then(|mut statement| statement.query_row([point.id, t_ms], |row| row.get(0)))
            .map_err(self.at("read readings"))
    }

    fn span(
        &self,
        point: PointId,
        from_ms: i64,
        to_ms: i64,
    ) -> Result<Vec<(i64, Reading)>, LedgerError> {
        let read = || -> rusqlite::Result<Vec<(i64, Reading)>> {
            self.connection
                .prepare_cached(concat!(
                    "SELECT ",
                    row::columns!(),
                    " FROM reading WHERE point_id = ? AND t_ms >= ? AND t_ms < ? ORDER BY seq"
                ))?
                .query_map(params![point.id, from_ms, to_ms], |row| {
                    row::read(row, point.kind)
                })?
                .collect()
        };
        read().map_err(self.at("read readings"))
    }

    fn at(&self, doing: &'static str) -> impl Fn(rusqlite::Error) -> LedgerError {
        move |source| LedgerError::of(&self.path, doing, source)
    }
}
