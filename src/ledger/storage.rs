//! # How the ledger lies on its disk: size, growth, room, who holds it open, how the writer and the last audit did

use super::backup::with_end;
use super::error::LedgerError;
use crate::electrode::units::Timestamp;
use rusqlite::{Connection, OptionalExtension};
use serde::{Deserialize, Serialize};
use std::path::Path;

/// A log longer than this means that somebody keeps it from being reset.
pub const LONG_LOG: u64 = 64 << 20;

/// How the writer did over the last minutes.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct WriterNote {
    /// Half of the commits took no longer, ms.
    pub commit_ms_p50: f64,
    /// 99 of 100 commits took no longer, ms.
    pub commit_ms_p99: f64,
    /// Commits looked at.
    pub commits: usize,
    /// Batches that waited when it was written.
    pub waiting: usize,
    /// Readings dropped in this run.
    pub dropped: u64,
}

/// The last audit that found nothing.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
pub struct AuditNote {
    /// Events looked at.
    pub events: u64,
    /// Readings looked at.
    pub readings: u64,
    /// Hash of the last event then.
    pub anchor: Option<String>,
}

/// How the ledger lies on its disk.
#[derive(Debug, Clone, PartialEq)]
pub struct Storage {
    /// The file, bytes.
    pub bytes: u64,
    /// Its write-ahead log, bytes.
    pub log_bytes: u64,
    /// Bytes free on its disk.
    pub free_bytes: u64,
    /// Bytes a year it will grow by, from the week before the newest sealed hour; none before anything is sealed.
    pub growth_per_year: Option<f64>,
    /// Processes that have the file open, as `name (number)`, as far as we may know.
    pub holders: Vec<String>,
    /// The writer's last note.
    pub writer: Option<(Timestamp, WriterNote)>,
    /// The last sound audit.
    pub audit: Option<(Timestamp, AuditNote)>,
}

impl Storage {
    /// Days until the disk is full at this growth.
    pub fn days_left(&self) -> Option<f64> {
        #[expect(clippy::cast_precision_loss, reason = "bytes of a disk, below 2^53")]
        let free = self.free_bytes as f64;
        self.growth_per_year
            .filter(|growth| *growth > 0.0)
            .map(|growth| free / growth * 365.0)
    }
}

pub(super) fn storage(connection: &Connection, path: &Path) -> Result<Storage, LedgerError> {
    let failed = |source| LedgerError::of(path, "look at the storage", source);
    let disk = rustix::fs::statvfs(path).map_err(|errno| LedgerError::System {
        doing: "look at the disk",
        path: path.to_path_buf(),
        source: errno.into(),
    })?;
    let size = |path: &Path| std::fs::metadata(path).map_or(0, |file| file.len());
    // Roll-ups and chain add four tenths to the blobs (measured: 2.2 and 3.1 bytes a reading).
    let growth: Option<f64> = connection
        .query_row(
            "SELECT sum(length(data)) * 1.4 * 365 * 24 / (max(hour) - min(hour) + 1) FROM sealed
             WHERE hour > (SELECT max(hour) FROM sealed) - 7 * 24",
            [],
            |row| row.get(0),
        )
        .map_err(failed)?;
    Ok(Storage {
        bytes: size(path),
        log_bytes: size(&with_end(path, "-wal")),
        free_bytes: disk.f_bavail.saturating_mul(disk.f_frsize),
        growth_per_year: growth,
        holders: holders(path),
        writer: note(connection, "writer").map_err(failed)?,
        audit: note(connection, "audit").map_err(failed)?,
    })
}

fn note<T: for<'a> Deserialize<'a>>(
    connection: &Connection,
    name: &str,
) -> rusqlite::Result<Option<(Timestamp, T)>> {
    let found: Option<(i64, String)> = connection
        .query_row(
            "SELECT at_ms, body FROM note WHERE name = ?",
            [name],
            |row| Ok((row.get(0)?, row.get(1)?)),
        )
        .optional()?;
    Ok(found.and_then(|(at_ms, body)| {
        let body = serde_json::from_str(&body).ok()?;
        Some((Timestamp::from_ms(at_ms), body))
    }))
}

/// Other processes that have the file open.
fn holders(path: &Path) -> Vec<String> {
    let Ok(path) = path.canonicalize() else {
        return Vec::new();
    };
    let own = std::process::id().to_string();
    let processes = std::fs::read_dir("/proc").into_iter().flatten().flatten();
    let mut found: Vec<String> = processes
        .filter_map(|process| {
            let number = process.file_name().into_string().ok()?;
            if number == own || !number.bytes().all(|b| b.is_ascii_digit()) {
                return None;
            }
            let mut open = std::fs::read_dir(process.path().join("fd")).ok()?.flatten();
            open.any(|fd| std::fs::read_link(fd.path()).is_ok_and(|file| file == path))
                .then(|| {
                    let name =
                        std::fs::read_to_string(process.path().join("comm")).unwrap_or_default();
                    format!("{} ({number})", name.trim())
                })
        })
        .collect();
    found.sort();
    found
}
