//! # The audit: does the chain hold, is the database whole

use super::chain::{self, Entry, Hash};
use crate::electrode::history::EventId;
use rusqlite::Connection;

/// What an audit found.
#[derive(Debug, Clone, PartialEq, Eq, Default)]
pub struct AuditReport {
    /// Events looked at.
    pub n_events: u64,
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
}

/// Walks the chain and asks SQLite.
pub(super) fn audit(connection: &Connection) -> rusqlite::Result<AuditReport> {
    let mut report = AuditReport::default();
    // One snapshot, or an event recorded meanwhile would look missing.
    let snapshot = connection.unchecked_transaction()?;
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
        before = hash;
        expected = id + 1;
    }
    let next: EventId =
        snapshot.query_row("SELECT next FROM counter WHERE name = 'event'", [], |row| {
            row.get(0)
        })?;
    if expected < next {
        report.breaks.push(ChainBreak::Missing {
            from: expected,
            to: next - 1,
        });
    }
    report.damage = snapshot
        .prepare("PRAGMA integrity_check(100)")?
        .query_map([], |row| row.get::<_, String>(0))?
        .filter(|line| line.as_ref().map_or(true, |line| line != "ok"))
        .collect::<rusqlite::Result<_>>()?;
    Ok(report)
}
