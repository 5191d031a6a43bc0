//! # The audit: does the chain hold, are the sealed hours what was sealed, is the database whole

use super::chain::{self, Entry, Hash};
use super::codec::{Rows, SEQ, TIME};
use super::event::Body;
use super::rollup::HOUR_MS;
use super::rows;
use super::seal::hex;
use crate::electrode::history::{EventId, Tag};
use rusqlite::Connection;
use std::collections::HashMap;
use std::path::Path;

/// What an audit found.
#[derive(Debug, Clone, PartialEq, Eq, Default)]
pub struct AuditReport {
    /// Events looked at, seals among them.
    pub n_events: u64,
    /// Sealed parts of hours looked at.
    pub n_sealed: u64,
    /// Readings there, sealed and not.
    pub n_readings: u64,
    /// Hash of the last event, hexadecimal: print it or mail it, and hold a later audit against it.
    pub head: Option<String>,
    /// The event that bears the hash the audit was held against.
    pub anchor: Option<EventId>,
    /// Where the chain is broken.
    pub breaks: Vec<ChainBreak>,
    /// What SQLite's own check found, one line each; at most 100.
    pub damage: Vec<String>,
}

impl AuditReport {
    /// Whether nothing is wrong.
    pub fn is_sound(&self) -> bool {
        self.breaks.is_empty() && self.damage.is_empty()
    }
}

/// One break of the chain.
#[derive(Debug, Clone, Copy, PartialEq, Eq, thiserror::Error)]
pub enum ChainBreak {
    /// An event's content does not match its hash.
    #[error("event {id} is not as it was recorded, or the event before it is not")]
    Changed {
        /// Its number.
        id: EventId,
    },
    /// Events are missing.
    #[error("events {from} to {to} are missing")]
    Missing {
        /// The first.
        from: EventId,
        /// The last.
        to: EventId,
    },
    /// No event bears the hash the audit was held against.
    #[error(
        "no event bears the hash given: the chain was rewritten since, or it is another ledger's"
    )]
    Anchor,
    /// A sealed part is not what its event says.
    #[error("sealed part {id} is not what was sealed")]
    PartChanged {
        /// Its number.
        id: i64,
    },
    /// A sealed part is gone.
    #[error("readings sealed by event {event} are missing")]
    PartMissing {
        /// The event.
        event: EventId,
    },
    /// Readings were recorded and are neither sealed nor open.
    #[error("{n} readings are missing")]
    ReadingsMissing {
        /// How many.
        n: i64,
    },
}

/// What an event says of a sealed part: event and blob's hash, by point, hour and part.
type Seals = HashMap<(Tag, i64, i64), (EventId, String)>;

/// Walks the chain, decodes every sealed part, counts, and asks SQLite.
pub(super) fn audit(
    connection: &Connection,
    path: &Path,
    anchor: Option<&str>,
) -> rusqlite::Result<AuditReport> {
    let mut report = AuditReport::default();
    // One snapshot, or an event recorded meanwhile would look missing.
    let snapshot = connection.unchecked_transaction()?;
    let seals = chain_of_events(&snapshot, anchor, &mut report)?;
    if anchor.is_some() && report.anchor.is_none() {
        report.breaks.push(ChainBreak::Anchor);
    }
    sealed_parts(&snapshot, path, seals, &mut report)?;
    count(&snapshot, &mut report)?;
    report.damage = snapshot
        .prepare("PRAGMA integrity_check(100)")?
        .query_map([], |row| row.get::<_, String>(0))?
        .filter(|line| line.as_ref().map_or(true, |line| line != "ok"))
        .collect::<rusqlite::Result<_>>()?;
    Ok(report)
}

fn chain_of_events(
    snapshot: &Connection,
    anchor: Option<&str>,
    report: &mut AuditReport,
) -> rusqlite::Result<Seals> {
    let mut seals = Seals::new();
    let mut before: Hash = chain::START;
    let mut expected: EventId = 1;
    let mut statement =
        snapshot.prepare("SELECT id, at_ms, entered_ms, by, body, hash FROM event ORDER BY id")?;
    let mut rows = statement.query([])?;
    while let Some(row) = rows.next()? {
        let (id, by, body, hash): (EventId, String, String, Hash) =
            (row.get(0)?, row.get(3)?, row.get(4)?, row.get(5)?);
        report.n_events += 1;
        if id > expected {
            report.breaks.push(ChainBreak::Missing {
                from: expected,
                to: id - 1,
            });
        }
        let entry = Entry {
            id,
            at_ms: row.get(1)?,
            entered_ms: row.get(2)?,
            by: &by,
            body: &body,
        };
        // Behind a gap the hash cannot match: the gap is the finding.
        if id == expected && chain::link(&before, &entry) != hash {
            report.breaks.push(ChainBreak::Changed { id });
        }
        if anchor.is_some_and(|anchor| hex(&hash).eq_ignore_ascii_case(anchor.trim())) {
            report.anchor = Some(id);
        }
        if body.starts_with("{\"event\":\"sealed\"")
            && let Ok(Body::Sealed {
                point,
                hour,
                part,
                sha256,
                ..
            }) = serde_json::from_str(&body)
        {
            seals.insert((point, hour.ms().div_euclid(HOUR_MS), part), (id, sha256));
        }
        before = hash;
        expected = id + 1;
    }
    let next = next(snapshot, "event")?;
    if expected < next {
        report.breaks.push(ChainBreak::Missing {
            from: expected,
            to: next - 1,
        });
    }
    report.head = (report.n_events > 0).then(|| hex(&before));
    Ok(seals)
}

fn sealed_parts(
    snapshot: &Connection,
    path: &Path,
    mut seals: Seals,
    report: &mut AuditReport,
) -> rusqlite::Result<()> {
    let mut statement = snapshot.prepare(
        "SELECT s.id, n, codec, data, sha256, p.tag, hour, part, seq_lo, seq_hi, t_lo, t_hi
         FROM sealed s LEFT JOIN point p ON p.id = s.point_id ORDER BY s.id",
    )?;
    let mut parts = statement.query([])?;
    let mut rows = Rows::default();
    while let Some(part) = parts.next()? {
        let id = part.get(0)?;
        let tag = part.get::<_, Option<String>>(5)?.unwrap_or_default();
        let sha256: Hash = part.get(4)?;
        let seal = seals.remove(&(Tag(tag), part.get(6)?, part.get(7)?));
        let is_as_sealed = seal.is_some_and(|(_, said)| said == hex(&sha256));
        let is_whole = rows::decode(path, part, &mut rows).is_ok()
            && ends_of(&rows, SEQ) == Some((part.get(8)?, part.get(9)?))
            && ends_of(&rows, TIME) == Some((part.get(10)?, part.get(11)?));
        report.n_sealed += 1;
        report.n_readings += u64::try_from(part.get::<_, i64>(1)?).unwrap_or(0);
        if !(is_as_sealed && is_whole) {
            report.breaks.push(ChainBreak::PartChanged { id });
        }
    }
    let mut gone: Vec<EventId> = seals.into_values().map(|(event, _)| event).collect();
    gone.sort_unstable();
    let gone = gone.into_iter();
    report
        .breaks
        .extend(gone.map(|event| ChainBreak::PartMissing { event }));
    Ok(())
}

fn ends_of(rows: &Rows, column: usize) -> Option<(i64, i64)> {
    let figures = rows.column(column).iter().copied();
    figures.clone().min().zip(figures.max())
}

/// Every number given out belongs to one reading, sealed or open.
fn count(snapshot: &Connection, report: &mut AuditReport) -> rusqlite::Result<()> {
    let n_open: i64 = snapshot.query_row(
        "SELECT count(*) FROM reading r JOIN point_state s ON s.point_id = r.point_id
         WHERE r.seq > s.sealed_to
           AND r.seq > (SELECT coalesce(min(sealed_to), 0) FROM point_state WHERE t_open IS NOT NULL)",
        [],
        |row| row.get(0),
    )?;
    report.n_readings += u64::try_from(n_open).unwrap_or(0);
    let n_given = next(snapshot, "reading")? - 1;
    let n_there = i64::try_from(report.n_readings).unwrap_or(i64::MAX);
    if n_there != n_given {
        report.breaks.push(ChainBreak::ReadingsMissing {
            n: n_given - n_there,
        });
    }
    Ok(())
}

fn next(snapshot: &Connection, counter: &str) -> rusqlite::Result<i64> {
    snapshot.query_row(
        "SELECT next FROM counter WHERE name = ?",
        [counter],
        |row| row.get(0),
    )
}
