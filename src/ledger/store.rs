//! # The ledger open for writing
//!
//! Every write is one `BEGIN IMMEDIATE` transaction: one that reads first and then writes fails beside another writer at once.

use super::backup::with_end;
use super::book;
use super::codec::{Packed, TIME};
use super::error::LedgerError;
use super::event::{Body, Event, NewEvent};
use super::line_state::{self, LineState};
use super::row::{self, PointId};
use super::schema::{self, IfMissing};
use super::seal::{Cut, Pass};
use super::storage::{AuditNote, LONG_LOG};
use crate::electrode::history::{Book, ProbeKind, Tag};
use crate::electrode::units::Timestamp;
use crate::watch::reading::Reading;
use rusqlite::{Connection, OptionalExtension, Transaction, TransactionBehavior, params};
use std::collections::BTreeMap;
use std::path::{Path, PathBuf};
use std::time::Duration;

/// Rows looked at in one transaction of pruning: some milliseconds.
const PRUNED_AT_ONCE: u32 = 10_000;

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

/// What one transaction of the writer brought.
#[derive(Debug, Clone, Copy, Default)]
pub(super) struct Committed {
    /// Sequence number of the last row.
    pub(super) last_seq: Option<i64>,
    /// Sequence number of the first row after the last step of the clock.
    pub(super) stepped_at: Option<i64>,
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
    ) -> Result<Committed, LedgerError> {
        let path = self.path.clone();
        let transaction = self.begin()?;
        let mut all = Committed::default();
        for batch in batches {
            let one = append_to(
                &transaction,
                &path,
                &batch.rows,
                &batch.events,
                Newest::LastArrived,
            )?;
            line_state::replace(&transaction, &path, &batch.lines)?;
            all.last_seq = Some(one.last_seq);
            let steps = |event: &NewEvent| matches!(event.body, Body::ClockStep { .. });
            if batch.events.iter().any(steps) {
                all.stepped_at = Some(one.first_seq);
            }
        }
        transaction
            .commit()
            .map_err(|source| LedgerError::of(&path, "commit readings", source))?;
        Ok(all)
    }

    /// Seals every row there is, whatever its hour: the hour that is open gets another part later. `now` is when it is done.
    ///
    /// # Errors
    /// What the database says; what was sealed before stays sealed.
    pub fn seal_all(&mut self, now: Timestamp) -> Result<(), LedgerError> {
        self.seal(Cut::All, now)
    }

    /// Seals the rows of each point up to its last one before `cut`.
    ///
    /// # Errors
    /// As [`Ledger::seal_all`].
    pub fn seal_before(&mut self, cut: Timestamp, now: Timestamp) -> Result<(), LedgerError> {
        self.seal(Cut::Before(cut), now)
    }

    pub(super) fn seal(&mut self, cut: Cut, now: Timestamp) -> Result<(), LedgerError> {
        let mut pass = Pass::new(cut, now);
        while self.seal_some(&mut pass)? {}
        Ok(())
    }

    /// A little of a pass; whether there is more to do.
    pub(super) fn seal_some(&mut self, pass: &mut Pass) -> Result<bool, LedgerError> {
        pass.step(&mut self.connection, &self.path)
    }

    /// Deletes sealed rows earlier than `before` from the front of the arrival table, some thousands at a time; whether there may be more.
    ///
    /// # Errors
    /// What the database says; nothing is deleted then.
    pub fn prune_some(&mut self, before: Timestamp) -> Result<bool, LedgerError> {
        let path = self.path.clone();
        let transaction = self.begin()?;
        let n = transaction
            .prepare_cached(
                "DELETE FROM reading WHERE seq IN (
                   SELECT seq FROM (
                     SELECT seq, t_ms FROM reading
                     WHERE seq <= coalesce(
                       (SELECT min(sealed_to) FROM point_state WHERE t_open IS NOT NULL),
                       (SELECT next - 1 FROM counter WHERE name = 'reading'))
                     ORDER BY seq LIMIT ?2)
                   WHERE t_ms < ?1)",
            )
            .and_then(|mut statement| statement.execute(params![before.ms(), PRUNED_AT_ONCE]))
            .and_then(|n| transaction.commit().map(|()| n))
            .map_err(|source| LedgerError::of(&path, "prune sealed readings", source))?;
        Ok(u32::try_from(n) == Ok(PRUNED_AT_ONCE))
    }

    /// Notes a sound audit, for `status`.
    ///
    /// # Errors
    /// What the database says.
    pub fn note_audit(&mut self, at: Timestamp, note: &AuditNote) -> Result<(), LedgerError> {
        self.note("audit", at, note)
    }

    /// Writes a note; cuts a log that has grown long.
    pub(super) fn note(
        &mut self,
        name: &str,
        at: Timestamp,
        note: &impl serde::Serialize,
    ) -> Result<(), LedgerError> {
        let body = serde_json::to_string(note).unwrap_or_default();
        let path = self.path.clone();
        let failed = |source| LedgerError::of(&path, "write a note", source);
        let transaction = self.begin()?;
        transaction
            .prepare_cached("INSERT OR REPLACE INTO note(name, at_ms, body) VALUES (?, ?, ?)")
            .and_then(|mut statement| statement.execute(params![name, at.ms(), body]))
            .map_err(failed)?;
        transaction.commit().map_err(failed)?;
        let log = std::fs::metadata(with_end(&path, "-wal"));
        if log.is_ok_and(|log| log.len() > LONG_LOG) {
            self.connection
                .query_row("PRAGMA wal_checkpoint(TRUNCATE)", [], |_| Ok(()))
                .map_err(failed)?;
        }
        Ok(())
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
    let mut states: BTreeMap<PointId, State> = BTreeMap::new();
    let mut insert = transaction.prepare_cached(concat!(
        "INSERT INTO reading(point_id, ",
        row::columns!(),
        ") VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?)"
    ))?;
    for (seq, (point, reading)) in (first_seq..).zip(rows) {
        let packed = row::pack(point.kind, seq, reading);
        row::bind(&mut insert, point.id, &packed)?;
        let t_ms = packed[TIME];
        let state = states.entry(*point).or_insert(State {
            first_seq: seq,
            t_lo: t_ms,
            t_hi: t_ms,
            newest: packed,
        });
        state.t_lo = state.t_lo.min(t_ms);
        state.t_hi = state.t_hi.max(t_ms);
        if newest == Newest::LastArrived || t_ms >= state.newest[TIME] {
            state.newest = packed;
        }
    }
    let mut take_up = transaction.prepare_cached(concat!(
        "INSERT INTO point_state(point_id, ",
        row::columns!(),
        ") VALUES (?1, ?2, ?3, ?4, ?5, ?6, ?7, ?8, ?9) ON CONFLICT(point_id) DO UPDATE SET
           (seq, t_ms, mv_uv, temp_mc, value_u, u_u, calibration_id, flags) = (?2, ?3, ?4, ?5, ?6, ?7, ?8, ?9)"
    ))?;
    let mut span = transaction.prepare_cached(
        "UPDATE point_state SET
           sealed_to = CASE WHEN t_open IS NULL THEN max(sealed_to, ?2) ELSE sealed_to END,
           t_max = max(coalesce(t_max, ?4), ?4),
           t_open = min(coalesce(t_open, ?3), ?3)
         WHERE point_id = ?1",
    )?;
    let mut t_newest =
        transaction.prepare_cached("SELECT t_ms FROM point_state WHERE point_id = ?")?;
    for (point, state) in states {
        let is_newest = newest == Newest::LastArrived || {
            let before: Option<i64> = t_newest
                .query_row([point.id], |row| row.get(0))
                .optional()?;
            before.is_none_or(|before| state.newest[TIME] >= before)
        };
        if is_newest {
            row::bind(&mut take_up, point.id, &state.newest)?;
        }
        // Nothing of the point waits in front of its first row here: what is sealed reaches up to it.
        span.execute(params![
            point.id,
            state.first_seq - 1,
            state.t_lo,
            state.t_hi
        ])?;
    }
    Ok(Appended {
        first_seq,
        last_seq: first_seq.saturating_add(n) - 1,
    })
}

/// What a transaction brings of one point.
struct State {
    first_seq: i64,
    t_lo: i64,
    t_hi: i64,
    newest: Packed,
}
