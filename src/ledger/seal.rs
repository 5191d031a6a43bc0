//! # Sealing: closed hours become one blob per point and hour, with roll-ups and an event in the chain
//!
//! Always: 1. rows are read and encoded outside the write lock; the marker is looked at again inside, so that two sealers never
//! seal a row twice. 2. blob, roll-ups, marker and event are one transaction. 3. a sealed part is never opened again: rows that
//! come later for its hour become the next part.

use super::book;
use super::codec::{self, CODEC, Packed, Rows, SEQ, TIME};
use super::error::LedgerError;
use super::event::{Body, NewEvent};
use super::rollup::{self, HOUR_MS};
use super::row;
use crate::electrode::history::Tag;
use crate::electrode::units::Timestamp;
use rusqlite::{Connection, OptionalExtension, Transaction, TransactionBehavior, params};
use sha2::{Digest, Sha256};
use std::collections::BTreeMap;
use std::fmt::Write as _;
use std::path::Path;

/// Rows looked at in one window, of all points: bounds the memory and what a search in the open rows costs.
pub(super) const WINDOW: i64 = 200_000;
/// Points whose rows are held in memory at once.
const POINTS_AT_ONCE: usize = 4;
/// Hours sealed in one transaction: keeps the lock short.
const HOURS_AT_ONCE: usize = 12;
/// Rows that may share a transaction whatever hours they are of: bounds the number of transactions when time is in disorder.
const ROWS_AT_ONCE: usize = 2_000;

/// What is to be sealed.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Cut {
    /// Of each point everything up to its last row before this time.
    Before(Timestamp),
    /// Everything up to this sequence number.
    UpTo(i64),
    /// Everything.
    All,
    /// Only so much that no more than a window stays open: while more is to come.
    Backlog,
}

/// A pass over all points, one small piece of work at a time.
#[derive(Debug)]
pub(super) struct Pass {
    cut: Cut,
    entered: Timestamp,
    top: Option<i64>,
    window: Option<Window>,
}

#[derive(Debug)]
struct Window {
    middle: i64,
    hi: i64,
    is_last: bool,
    points: Vec<Open>,
}

/// A point with rows that are not sealed.
#[derive(Debug, Clone)]
struct Open {
    id: i64,
    tag: Tag,
    sealed_to: i64,
}

impl Pass {
    /// Nothing is done before the first [`Pass::step`].
    pub(super) const fn new(cut: Cut, entered: Timestamp) -> Self {
        Self {
            cut,
            entered,
            top: None,
            window: None,
        }
    }

    /// Seals a little; whether there is more to do.
    pub(super) fn step(
        &mut self,
        connection: &mut Connection,
        path: &Path,
    ) -> Result<bool, LedgerError> {
        let at = |source| LedgerError::of(path, "seal readings", source);
        let mut window = match self.window.take() {
            Some(window) => window,
            None => match self.next_window(connection).map_err(at)? {
                Some(window) => window,
                None => return Ok(false),
            },
        };
        let rest = window.points.len().saturating_sub(POINTS_AT_ONCE);
        let group = window.points.split_off(rest);
        let mut rows = load(connection, &group, window.hi).map_err(at)?;
        for point in &group {
            let rows = rows.remove(&point.id).unwrap_or_default();
            let into = Into { connection, path };
            self.seal_point(into, point, &rows, &window)?;
        }
        let done = window.points.is_empty();
        let more = !(done && window.is_last);
        if !done {
            self.window = Some(window);
        }
        Ok(more)
    }

    fn next_window(&mut self, connection: &Connection) -> rusqlite::Result<Option<Window>> {
        let top = match (self.cut, self.top) {
            (Cut::UpTo(seq), _) | (_, Some(seq)) => seq,
            _ => connection.query_row(
                "SELECT next - 1 FROM counter WHERE name = 'reading'",
                [],
                |row| row.get(0),
            )?,
        };
        self.top = Some(top);
        let points: Vec<Open> = connection
            .prepare_cached(
                "SELECT s.point_id, p.tag, s.sealed_to FROM point_state s JOIN point p ON p.id = s.point_id
                 WHERE s.sealed_to < ? AND s.t_open IS NOT NULL ORDER BY s.point_id DESC",
            )?
            .query_map([top], |row| {
                Ok(Open {
                    id: row.get(0)?,
                    tag: Tag(row.get(1)?),
                    sealed_to: row.get(2)?,
                })
            })?
            .collect::<rusqlite::Result<_>>()?;
        let Some(lo) = points.iter().map(|point| point.sealed_to).min() else {
            return Ok(None);
        };
        let is_last = top - lo <= WINDOW;
        if is_last && self.cut == Cut::Backlog {
            return Ok(None);
        }
        let hi = top.min(lo + WINDOW);
        Ok(Some(Window {
            middle: lo + WINDOW / 2,
            hi,
            is_last,
            points: points
                .into_iter()
                .filter(|point| point.sealed_to < hi)
                .collect(),
        }))
    }

    fn seal_point(
        &self,
        mut into: Into<'_>,
        point: &Open,
        rows: &[Packed],
        window: &Window,
    ) -> Result<(), LedgerError> {
        let n = match (self.cut, window.is_last) {
            (Cut::Before(cut), true) => rows
                .iter()
                .rposition(|row| row[TIME] < cut.ms())
                .map_or(0, |last| last + 1),
            (_, true) => rows.len(),
            (_, false) => without_last_hour(rows, window.middle),
        };
        // What was looked at and is not sealed begins at the first row left.
        let marker_after = |n: usize| rows.get(n).map_or(window.hi, |row| row[SEQ] - 1);
        let mut expected = point.sealed_to;
        let mut done = 0;
        loop {
            let piece = piece(&rows[done..n]);
            let next = done + piece.len();
            let is_end = next == n;
            let marker = if is_end {
                marker_after(n)
            } else {
                piece.last().map_or(expected, |row| row[SEQ])
            };
            if marker <= expected {
                return Ok(());
            }
            let parts = parts(piece, into.path)?;
            let moved = Moved {
                expected,
                marker,
                is_end,
                entered: self.entered,
            };
            if !write(&mut into, point, &parts, moved)? || is_end {
                return Ok(());
            }
            (expected, done) = (marker, next);
        }
    }
}

/// Rows of `points` behind their markers up to `hi`, in order of arrival.
fn load(
    connection: &Connection,
    points: &[Open],
    hi: i64,
) -> rusqlite::Result<BTreeMap<i64, Vec<Packed>>> {
    let mut rows: BTreeMap<i64, Vec<Packed>> = BTreeMap::new();
    let mut ids = [-1; POINTS_AT_ONCE];
    for (id, point) in ids.iter_mut().zip(points) {
        *id = point.id;
    }
    let lo = points.iter().map(|p| p.sealed_to).min().unwrap_or(hi);
    let mut statement = connection.prepare_cached(concat!(
        "SELECT point_id, ",
        row::columns!(),
        " FROM reading WHERE seq > ? AND seq <= ? AND point_id IN (?, ?, ?, ?) ORDER BY seq"
    ))?;
    let mut found = statement.query(params![lo, hi, ids[0], ids[1], ids[2], ids[3]])?;
    while let Some(found) = found.next()? {
        let id: i64 = found.get(0)?;
        let packed = row::read(found, 1)?;
        if points
            .iter()
            .any(|point| point.id == id && packed[SEQ] > point.sealed_to)
        {
            rows.entry(id).or_default().push(packed);
        }
    }
    Ok(rows)
}

/// How many rows come before the run of the last row's hour; all when that run began in the first half of the window.
fn without_last_hour(rows: &[Packed], middle: i64) -> usize {
    let hour = |row: &Packed| row[TIME].div_euclid(HOUR_MS);
    let Some(last) = rows.last().map(hour) else {
        return 0;
    };
    let n = rows
        .iter()
        .rposition(|row| hour(row) != last)
        .map_or(0, |at| at + 1);
    if rows[n][SEQ] <= middle {
        rows.len()
    } else {
        n
    }
}

/// The rows of the next transaction.
fn piece(rows: &[Packed]) -> &[Packed] {
    let (mut n_runs, mut last) = (0, None);
    for (at, row) in rows.iter().enumerate() {
        let hour = row[TIME].div_euclid(HOUR_MS);
        if last != Some(hour) {
            n_runs += 1;
            last = Some(hour);
            if n_runs > HOURS_AT_ONCE && at >= ROWS_AT_ONCE {
                return &rows[..at];
            }
        }
    }
    rows
}

/// A part of an hour, ready to be written.
struct Part {
    hour: i64,
    rows: Rows,
    data: Vec<u8>,
    sha256: [u8; 32],
}

fn parts(rows: &[Packed], path: &Path) -> Result<Vec<Part>, LedgerError> {
    let mut hours: BTreeMap<i64, Rows> = BTreeMap::new();
    for row in rows {
        hours
            .entry(row[TIME].div_euclid(HOUR_MS))
            .or_default()
            .push(row);
    }
    hours
        .into_iter()
        .map(|(hour, rows)| {
            let data = codec::encode(&rows).map_err(|source| LedgerError::System {
                doing: "compress readings",
                path: path.to_path_buf(),
                source,
            })?;
            Ok(Part {
                hour,
                sha256: Sha256::digest(&data).into(),
                rows,
                data,
            })
        })
        .collect()
}

/// From where to where the marker of a point moves.
#[derive(Debug, Clone, Copy)]
struct Moved {
    expected: i64,
    marker: i64,
    is_end: bool,
    entered: Timestamp,
}

/// The ledger to seal in.
struct Into<'a> {
    connection: &'a mut Connection,
    path: &'a Path,
}

/// One transaction; false when another sealer was faster.
fn write(
    into: &mut Into<'_>,
    point: &Open,
    parts: &[Part],
    moved: Moved,
) -> Result<bool, LedgerError> {
    let path = into.path;
    let at = |source| LedgerError::of(path, "seal readings", source);
    let transaction = into
        .connection
        .transaction_with_behavior(TransactionBehavior::Immediate)
        .map_err(at)?;
    let sealed_to: i64 = transaction
        .prepare_cached("SELECT sealed_to FROM point_state WHERE point_id = ?")
        .and_then(|mut statement| statement.query_row([point.id], |row| row.get(0)))
        .map_err(at)?;
    if sealed_to != moved.expected {
        return Ok(false);
    }
    for part in parts {
        let event = insert(&transaction, point, part, moved.entered).map_err(at)?;
        book::append(&transaction, path, &event)?;
    }
    transaction
        .prepare_cached(
            "UPDATE point_state SET sealed_to = ?2, t_open = CASE WHEN ?3
               THEN (SELECT min(t_ms) FROM reading WHERE seq > ?2 AND point_id = ?1) ELSE t_open END
             WHERE point_id = ?1",
        )
        .and_then(|mut statement| statement.execute(params![point.id, moved.marker, moved.is_end]))
        .map_err(at)?;
    transaction.commit().map_err(at)?;
    Ok(true)
}

fn insert(
    transaction: &Transaction<'_>,
    point: &Open,
    part: &Part,
    entered: Timestamp,
) -> rusqlite::Result<NewEvent> {
    let number = transaction
        .prepare_cached("SELECT max(part) + 1 FROM sealed WHERE point_id = ? AND hour = ?")?
        .query_row([point.id, part.hour], |row| row.get::<_, Option<i64>>(0))
        .optional()?
        .flatten()
        .unwrap_or(0);
    let ends = |column: usize| {
        let figures = part.rows.column(column).iter().copied();
        (
            figures.clone().min().unwrap_or(0),
            figures.max().unwrap_or(0),
        )
    };
    let ((seq_lo, seq_hi), (t_lo, t_hi)) = (ends(SEQ), ends(TIME));
    transaction
        .prepare_cached(
            "INSERT INTO sealed(point_id, hour, part, n, seq_lo, seq_hi, t_lo, t_hi, codec, data, sha256)
             VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?)",
        )?
        .execute(params![
            point.id,
            part.hour,
            number,
            i64::try_from(part.rows.len()).unwrap_or(i64::MAX),
            seq_lo,
            seq_hi,
            t_lo,
            t_hi,
            CODEC,
            part.data,
            part.sha256
        ])?;
    rollup::add(transaction, point.id, &part.rows)?;
    Ok(NewEvent {
        at: Timestamp::from_ms(t_hi),
        entered,
        by: "halfcell".to_owned(),
        body: Body::Sealed {
            point: point.tag.clone(),
            hour: Timestamp::from_ms(part.hour * HOUR_MS),
            part: number,
            n: part.rows.len() as u64,
            sha256: hex(&part.sha256),
        },
    })
}

/// Seals `rows` of a point once more as the next part of their hour; the caller holds the transaction.
pub(super) fn seal_again(
    transaction: &Transaction<'_>,
    path: &Path,
    tag: &Tag,
    rows: &Rows,
    entered: Timestamp,
) -> Result<(), LedgerError> {
    let at = |source| LedgerError::of(path, "seal readings", source);
    let id = transaction
        .query_row("SELECT id FROM point WHERE tag = ?", [&tag.0], |row| {
            row.get(0)
        })
        .map_err(at)?;
    let point = Open {
        id,
        tag: tag.clone(),
        sealed_to: 0,
    };
    let packed: Vec<Packed> = rows.iter().collect();
    for part in parts(&packed, path)? {
        let event = insert(transaction, &point, &part, entered).map_err(at)?;
        book::append(transaction, path, &event)?;
    }
    Ok(())
}

/// Lower-case hexadecimal.
pub(super) fn hex(bytes: &[u8]) -> String {
    bytes.iter().fold(String::new(), |mut text, byte| {
        // Writing to a string cannot fail.
        write!(text, "{byte:02x}").unwrap_or_default();
        text
    })
}
