//! # The ledger open for reading
//!
//! Short transactions only: a reader that keeps a snapshot stops the log from being reset.

use super::audit::{self, AuditReport};
use super::book;
use super::chart::{self, Bucket};
use super::error::LedgerError;
use super::event::Event;
use super::line_state::{self, LineState};
use super::row::{self, PointId};
use super::rows::At;
use super::schema;
use super::storage::{self, Storage};
use crate::electrode::history::{Book, EventId, Tag};
use crate::electrode::units::Timestamp;
use crate::watch::reading::Reading;
use rusqlite::{Connection, OptionalExtension};
use std::ops::ControlFlow;
use std::path::{Path, PathBuf};

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
        let row = match at {
            Some(at) => self.at_point(point).newest(at.ms())?,
            None => self
                .connection
                .prepare_cached(concat!(
                    "SELECT ",
                    row::columns!(),
                    " FROM point_state WHERE point_id = ?"
                ))
                .and_then(|mut statement| {
                    statement
                        .query_row([point.id], |row| row::read(row, 0))
                        .optional()
                })
                .map_err(self.at("read the newest reading"))?,
        };
        Ok(row.map(|row| row::unpack(point.kind, &row)))
    }

    /// Gives `each` the readings of `point` from `from` up to before `to` with their sequence numbers: by time, then by sequence,
    /// until it breaks. It is read hour by hour; what arrives after the call began is not seen.
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
        self.at_point(point).walk(&(from.ms()..to.ms()), |row| {
            let (seq, reading) = row::unpack(point.kind, row);
            each(seq, reading)
        })
    }

    /// The newest state of every line that a daemon has run, by name.
    ///
    /// # Errors
    /// What the database says.
    pub fn lines(&self) -> Result<Vec<LineState>, LedgerError> {
        line_state::all(&self.connection).map_err(self.at("read the state of the lines"))
    }

    /// `point` from `from` up to before `to` in `n` buckets of equal length. Buckets of an hour or more are made of whole
    /// hours, of a minute or more of whole minutes (what touches the span's ends counts whole), shorter ones of the readings.
    ///
    /// # Errors
    /// What the database says.
    pub fn chart(
        &self,
        point: PointId,
        from: Timestamp,
        to: Timestamp,
        n: u32,
    ) -> Result<Vec<Bucket>, LedgerError> {
        chart::chart(&self.at_point(point), point.kind, &(from.ms()..to.ms()), n)
    }

    /// What is broken in the chain of events, in the sealed hours and in the database, and where.
    ///
    /// # Errors
    /// When the database cannot be read at all.
    pub fn audit(&self) -> Result<AuditReport, LedgerError> {
        self.audit_from(None)
    }

    /// As [`Reader::audit`]; `anchor` is a hash printed or mailed earlier: a chain rewritten since then does not hold it.
    ///
    /// # Errors
    /// As [`Reader::audit`].
    pub fn audit_from(&self, anchor: Option<&str>) -> Result<AuditReport, LedgerError> {
        audit::audit(&self.connection, &self.path, anchor).map_err(self.at("audit"))
    }

    /// How the ledger lies on its disk.
    ///
    /// # Errors
    /// What the database or the system says.
    pub fn storage(&self) -> Result<Storage, LedgerError> {
        storage::storage(&self.connection, &self.path)
    }

    fn at_point(&self, point: PointId) -> At<'_> {
        At {
            connection: &self.connection,
            path: &self.path,
            point: point.id,
        }
    }

    fn at(&self, doing: &'static str) -> impl Fn(rusqlite::Error) -> LedgerError {
        move |source| LedgerError::of(&self.path, doing, source)
    }
}
