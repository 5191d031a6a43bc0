//! # The ledger open for writing
//!
//! Every write is one `BEGIN IMMEDIATE` transaction: one that reads first and then writes fails beside another writer at once.

use super::book;
use super::error::LedgerError;
use super::event::{Body, Event, NewEvent};
use super::line_state::{self, LineState};
use super::row::{self, PointId};
use super::schema::{self, IfMissing};
use crate::electrode::history::{Book, ProbeKind, Tag};
use crate::watch::reading::Reading;
use rusqlite::{Connection, OptionalExtension, Transaction, TransactionBehavior, params};
use std::collections::BTreeMap;
use std::path::{Path, PathBuf};
use std::time::Duration;

/// The ledger open for reading and writing.
#[derive(Debug)]
pub struct Ledger {
    path: PathBuf,
    connection: Connection,
}

/// What one append gave out.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Appended {
    /// Sequence number of the first row; of the next row to come when there was none.
    pub first_seq: i64,
    /// Sequence number of the last row; one below `first_seq` when there was none.
    pub last_seq: i64,
}

/// Rows and events that belong into one transaction.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Batch {
    /// Readings, in order of arrival.
    pub rows: Vec<(PointId, Reading)>,
    /// Events. A [`Body::ClockStep`] gets the number of this batch's first row.
    pub events: Vec<NewEvent>,
    /// The newest state of lines; each replaces the one before.
    pub lines: Vec<LineState>,
}

/// Which row becomes a point's newest.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Newest {
    /// The last to arrive, whatever the clock says: live.
    LastArrived,
    /// The last in time: backfill must not hide what is newer.
    LastInTime,
}

impl Ledger {
    /// Opens the ledger at `path`, makes it when there is none, brings it up to this version.
    ///
    /// # Errors
    /// [`LedgerError`]: no ledger, of a newer version, read-only, locked, on a network file system.
    pub fn open(path: &Path) -> Result<Self, LedgerError> {
        Self::open_with(path, IfMissing::Create)
    }

    /// Opens the ledger at `path`; a file that is gone is not made anew.
    ///
    /// # Errors
    /// As [`Ledger::open`], and [`LedgerError::Missing`].
    pub fn open_existing(path: &Path) -> Result<Self, LedgerError> {
        Self::open_with(path, IfMissing::Refuse)
    }

    fn open_with(path: &Path, if_missing: IfMissing) -> Result<Self, LedgerError> {
        Ok(Self {
            path: path.to_path_buf(),
            connection: schema::open_writable(path, if_missing)?,
        })
    }

    /// Where it lies.
    pub fn path(&self) -> &Path {
        &self.path
    }

    /// The point of this tag, taken up when it is new.
    ///
    /// # Errors
    /// [`LedgerError::OtherQuantity`] when it measured something else so far; what the database says.
    pub fn point(&mut self, tag: &Tag, kind: ProbeKind) -> Result<PointId, LedgerError> {
        let path = self.path.clone();
        let at = |source| LedgerError::of(&path, "take up a point", source);
        let transaction = self.begin()?;
        let known: Option<(i64, String)> = transaction
            .query_row(
                "SELECT id, quantity FROM point WHERE tag = ?",
                [&tag.0],
                |row| Ok((row.get(0)?, row.get(1)?)),
            )
            .optional()
            .map_err(at)?;
        let id = match known {
            Some((id, quantity)) if quantity == kind.name() => id,
            Some(_) => {
                return Err(LedgerError::OtherQuantity {
                    tag: tag.clone(),
                    there: match kind {
                        ProbeKind::Ph => ProbeKind::Orp,
                        ProbeKind::Orp => ProbeKind::Ph,
                    },
                    asked: kind,
                });
            }
            None => {
                transaction
                    .execute(
                        "INSERT INTO point(tag, quantity) VALUES (?, ?)",
                        params![tag.0, kind.name()],
                    )
                    .map_err(at)?;
                transaction.last_insert_rowid()
            }
        };
        transaction.commit().map_err(at)?;
        Ok(PointId { id, kind })
    }

    /// Records one event.
    ///
    /// # Errors
    /// [`LedgerError::UnstorableEvent`], or what the database says; nothing is written then.
    pub fn record(&mut self, event: NewEvent) -> Result<Event, LedgerError> {
        let path = self.path.clone();
        let transaction = self.begin()?;
        let id = book::append(&transaction, &path, &event)?;
        transaction
            .commit()
            .map_err(|source| LedgerError::of(&path, "commit an event", source))?;
        Ok(recorded(id, event))
    }

    /// Checks against the book and records, with nobody else writing in between.
    ///
    /// # Errors
    /// Outer: as [`Ledger::record`]. Inner: what `check` said; nothing is written then.
    pub fn record_checked<E>(
        &mut self,
        check: impl FnOnce(&Book) -> Result<NewEvent, E>,
    ) -> Result<Result<Event, E>, LedgerError> {
        let path = self.path.clone();
        let transaction = self.begin()?;
        let book = book::book(&transaction, &path, None)?;
        let event = match check(&book) {
            Ok(event) => event,
            Err(refused) => return Ok(Err(refused)),
        };
        let id = book::append(&transaction, &path, &event)?;
        transaction
            .commit()
            .map_err(|source| LedgerError::of(&path, "commit an event", source))?;
        Ok(Ok(recorded(id, event)))
    }

    /// Appends readings and events in one synced transaction.
    ///
    /// # Errors
    /// What the database says; nothing is written then.
    pub fn append(
        &mut self,
        rows: &[(PointId, Reading)],
        events: &[NewEvent],
    ) -> Result<Appended, LedgerError> {
        let path = self.path.clone();
        let transaction = self.begin()?;
        let appended = append_to(&transaction, &path, rows, events, Newest::LastArrived)?;
        transaction
            .commit()
            .map_err(|source| LedgerError::of(&path, "commit readings", source))?;
        Ok(appended)
    }

    /// Appends several batches in one synced transaction.
    pub(super) fn append_batches<'a>(
        &mut self,
        batches: impl Iterator<Item = &'a Batch>,
    ) -> Result<Option<Appended>, LedgerError> {
        let path = self.path.clone();
        let transaction = self.begin()?;
        let mut all: Option<Appended> = None;
        for batch in batches {
            let one = append_to(
                &transaction,
                &path,
                &batch.rows,
                &batch.events,
                Newest::LastArrived,
            )?;
            line_state::replace(&transaction, &path, &batch.lines)?;
            all = Some(Appended {
                first_seq: all.map_or(one.first_seq, |all| all.first_seq),
                last_seq: one.last_seq,
            });
        }
        transaction
            .commit()
            .map_err(|source| LedgerError::of(&path, "commit readings", source))?;
        Ok(all)
    }

    /// How long to wait for another process's lock.
    pub(super) fn wait_for_locks(&self, limit: Duration) -> Result<(), LedgerError> {
        self.connection
            .busy_timeout(limit)
            .map_err(|source| LedgerError::of(&self.path, "set the timeout", source))
    }

    /// A transaction that holds the write lock from its first moment.
    pub(super) fn begin(&mut self) -> Result<Transaction<'_>, LedgerError> {
        self.connection
            .transaction_with_behavior(TransactionBehavior::Immediate)
            .map_err(|source| LedgerError::of(&self.path, "begin a transaction", source))
    }
}

fn recorded(id: i64, event: NewEvent) -> Event {
    let NewEvent {
        at,
        entered,
        by,
        body,
    } = event;
    Event {
        id,
        at,
        entered,
        by,
        body,
    }
}

/// Appends within the caller's transaction.
pub(super) fn append_to(
    transaction: &Transaction<'_>,
    path: &Path,
    rows: &[(PointId, Reading)],
    events: &[NewEvent],
    newest: Newest,
) -> Result<Appended, LedgerError> {
    let appended = insert_rows(transaction, rows, newest)
        .map_err(|source| LedgerError::of(path, "append readings", source))?;
    for event in events {
        let mut event = event.clone();
        if let Body::ClockStep { seq, .. } = &mut event.body {
            *seq = appended.first_seq;
        }
        book::append(transaction, path, &event)?;
    }
    Ok(appended)
}

fn insert_rows(
    transaction: &Transaction<'_>,
    rows: &[(PointId, Reading)],
    newest: Newest,
) -> rusqlite::Result<Appended> {
    let n = i64::try_from(rows.len()).unwrap_or(i64::MAX);
    let first_seq = book::take(transaction, "reading", n)?;
    let mut states: BTreeMap<PointId, (i64, &Reading)> = BTreeMap::new();
    let mut insert = transaction.prepare_cached(concat!(
        "INSERT INTO reading(point_id, ",
        row::columns!(),
        ") VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?)"
    ))?;
    for (seq, (point, reading)) in (first_seq..).zip(rows) {
        row::bind(&mut insert, *point, seq, reading)?;
        let state = states.entry(*point).or_insert((seq, reading));
        if newest == Newest::LastArrived || reading.at >= state.1.at {
            *state = (seq, reading);
        }
    }
    let mut upsert = transaction.prepare_cached(match newest {
        Newest::LastArrived => concat!(
            "INSERT OR REPLACE INTO point_state(point_id, ",
            row::columns!(),
            ") VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?)"
        ),
        Newest::LastInTime => concat!(
            "INSERT OR REPLACE INTO point_state(point_id, ",
            row::columns!(),
            ") SELECT ?1, ?2, ?3, ?4, ?5, ?6, ?7, ?8, ?9
               WHERE NOT EXISTS (SELECT 1 FROM point_state WHERE point_id = ?1 AND t_ms > ?3)"
        ),
    })?;
    for (point, (seq, reading)) in states {
        row::bind(&mut upsert, point, seq, reading)?;
    }
    Ok(Appended {
        first_seq,
        last_seq: first_seq.saturating_add(n) - 1,
    })
}
