//! # Opening, pragmas and migrations
//!
//! in: a path. out: a connection to a ledger of this version, or why not.

use super::error::LedgerError;
use rusqlite::{Connection, ErrorCode, OpenFlags, TransactionBehavior};
use std::path::{Path, PathBuf};
use std::time::Duration;

/// The migrations, in order; a ledger's version is how many it has had. Never edited after release.
const MIGRATIONS: &[&str] = &[
    include_str!("../../migrations/0001-readings-and-events.sql"),
    include_str!("../../migrations/0002-sealed-hours.sql"),
    include_str!("../../migrations/0003-line-state.sql"),
];

/// "half" in ASCII, as the first migration sets it.
const APPLICATION_ID: i64 = 1_751_215_206;

/// How long to wait for another process's lock.
pub(super) const BUSY_TIMEOUT: Duration = Duration::from_secs(5);

/// The newest version known.
fn known() -> i64 {
    i64::try_from(MIGRATIONS.len()).unwrap_or(i64::MAX)
}

/// Whether a missing file is made.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum IfMissing {
    Create,
    Refuse,
}

/// Opens to read and write, and brings the ledger up to this version.
pub(super) fn open_writable(path: &Path, if_missing: IfMissing) -> Result<Connection, LedgerError> {
    refuse_network(path)?;
    let mut flags = OpenFlags::SQLITE_OPEN_READ_WRITE | OpenFlags::SQLITE_OPEN_NO_MUTEX;
    match if_missing {
        IfMissing::Create => flags |= OpenFlags::SQLITE_OPEN_CREATE,
        IfMissing::Refuse if !path.exists() => {
            return Err(LedgerError::Missing {
                path: path.to_path_buf(),
            });
        }
        IfMissing::Refuse => {}
    }
    let at = |doing| move |source| LedgerError::of(path, doing, source);
    let mut connection = Connection::open_with_flags(path, flags).map_err(at("open the file"))?;
    connection
        .busy_timeout(BUSY_TIMEOUT)
        .map_err(at("set the timeout"))?;
    let version = version(&connection, path).map_err(|error| match error {
        // The log and its shared memory cannot be made beside the file.
        LedgerError::Database { path, source, .. }
            if source.sqlite_error_code() == Some(ErrorCode::CannotOpen) =>
        {
            LedgerError::ReadOnly { path, source }
        }
        error => error,
    })?;
    if connection
        .is_readonly("main")
        .map_err(at("ask for permission"))?
    {
        return Err(LedgerError::ReadOnly {
            path: path.to_path_buf(),
            source: rusqlite::Error::SqliteFailure(
                rusqlite::ffi::Error::new(rusqlite::ffi::SQLITE_READONLY),
                None,
            ),
        });
    }
    let mode: String = connection
        .pragma_update_and_check(None, "journal_mode", "WAL", |row| row.get(0))
        .map_err(at("switch to the write-ahead log"))?;
    if mode != "wal" {
        return Err(LedgerError::System {
            doing: "switch to the write-ahead log",
            path: path.to_path_buf(),
            source: std::io::Error::other(format!("the journal stays in mode {mode}")),
        });
    }
    connection
        .execute_batch(
            "PRAGMA synchronous=FULL; PRAGMA wal_autocheckpoint=1000; PRAGMA journal_size_limit=16777216;
             PRAGMA foreign_keys=ON; PRAGMA trusted_schema=OFF;",
        )
        .map_err(at("set the pragmas"))?;
    if version < known() {
        migrate(&mut connection).map_err(at("bring the tables up to this version"))?;
    }
    Ok(connection)
}

/// Opens to read. Falls back to `immutable=1` only when there is no log that it would not see.
pub(super) fn open_readable(path: &Path) -> Result<Connection, LedgerError> {
    if !path.exists() {
        return Err(LedgerError::Missing {
            path: path.to_path_buf(),
        });
    }
    refuse_network(path)?;
    let flags = OpenFlags::SQLITE_OPEN_READ_ONLY | OpenFlags::SQLITE_OPEN_NO_MUTEX;
    let open = |immutable: bool| -> Result<(Connection, i64), LedgerError> {
        let at = |source| LedgerError::of(path, "open the file to read", source);
        let connection = if immutable {
            Connection::open_with_flags(uri(path), flags | OpenFlags::SQLITE_OPEN_URI)
        } else {
            Connection::open_with_flags(path, flags)
        }
        .map_err(at)?;
        connection.busy_timeout(BUSY_TIMEOUT).map_err(at)?;
        let version = version(&connection, path)?;
        Ok((connection, version))
    };
    let (connection, version) = match open(false) {
        Err(LedgerError::Database { .. } | LedgerError::ReadOnly { .. })
            if !log_of(path).exists() =>
        {
            open(true)?
        }
        other => other?,
    };
    if version < known() {
        return Err(LedgerError::Older {
            path: path.to_path_buf(),
            version,
            known: known(),
        });
    }
    Ok(connection)
}

/// Where the write-ahead log lies.
fn log_of(path: &Path) -> PathBuf {
    let mut name = path.as_os_str().to_owned();
    name.push("-wal");
    PathBuf::from(name)
}

fn uri(path: &Path) -> String {
    let mut uri = "file:".to_owned();
    for c in path.to_string_lossy().chars() {
        match c {
            '?' => uri.push_str("%3f"),
            '#' => uri.push_str("%23"),
            '%' => uri.push_str("%25"),
            c => uri.push(c),
        }
    }
    uri + "?immutable=1"
}

/// The version of the file; refuses what is newer and what is no ledger.
fn version(connection: &Connection, path: &Path) -> Result<i64, LedgerError> {
    let (version, id, tables): (i64, i64, i64) = connection
        .query_row(
            "SELECT (SELECT user_version FROM pragma_user_version), (SELECT application_id FROM pragma_application_id),
                    (SELECT count(*) FROM sqlite_schema)",
            [],
            |row| Ok((row.get(0)?, row.get(1)?, row.get(2)?)),
        )
        .map_err(|source| LedgerError::of(path, "read the version", source))?;
    let fresh = version == 0 && id == 0 && tables == 0;
    if !fresh && id != APPLICATION_ID {
        return Err(LedgerError::NotALedger {
            path: path.to_path_buf(),
        });
    }
    if version > known() {
        return Err(LedgerError::Newer {
            path: path.to_path_buf(),
            version,
            known: known(),
        });
    }
    Ok(version)
}

/// All that is missing in one transaction, so that nobody sees a version in between; the version is read again inside, for
/// two processes may start at once.
fn migrate(connection: &mut Connection) -> Result<(), rusqlite::Error> {
    let transaction = connection.transaction_with_behavior(TransactionBehavior::Immediate)?;
    let version: i64 = transaction.pragma_query_value(None, "user_version", |row| row.get(0))?;
    for (number, sql) in (1_i64..).zip(MIGRATIONS) {
        if version < number {
            transaction.execute_batch(sql)?;
            transaction.pragma_update(None, "user_version", number)?;
        }
    }
    transaction.commit()
}

/// Write-ahead logging needs shared memory, which network file systems do not give.
fn refuse_network(path: &Path) -> Result<(), LedgerError> {
    let folder = match path.parent() {
        Some(folder) if !folder.as_os_str().is_empty() => folder,
        _ => Path::new("."),
    };
    let system =
        rustix::fs::statfs(if path.exists() { path } else { folder }).map_err(|errno| {
            LedgerError::System {
                doing: "look at the file system",
                path: path.to_path_buf(),
                source: errno.into(),
            }
        })?;
    match network_name(i128::from(system.f_type)) {
        Some(kind) => Err(LedgerError::NetworkFileSystem {
            path: path.to_path_buf(),
            kind,
        }),
        None => Ok(()),
    }
}

/// The network file systems by their numbers (statfs(2), from memory).
fn network_name(number: i128) -> Option<&'static str> {
    // The kernel's number is 32 bits wide; the C type may be wider or signed.
    match number & 0xffff_ffff {
        0x6969 => Some("NFS"),
        0xff53_4d42 => Some("CIFS"),
        0xfe53_4d42 => Some("SMB2"),
        0x517b => Some("SMB"),
        0x564c => Some("NCP"),
        0x5346_414f => Some("AFS"),
        0x00c3_6400 => Some("Ceph"),
        0x0102_1997 => Some("9P"),
        _ => None,
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_network_file_system_is_known_by_its_number() {
        assert_eq!(network_name(0x6969), Some("NFS"));
        assert_eq!(
            network_name(i128::from(0xff53_4d42_u32.cast_signed())),
            Some("CIFS")
        );
        assert_eq!(network_name(0xef53), None, "ext4 is local");
    }

    #[test]
    fn every_migration_in_the_folder_is_applied_in_order() {
        let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("migrations");
        let mut files: Vec<_> = std::fs::read_dir(folder)
            .unwrap()
            .map(|e| e.unwrap().path())
            .collect();
        files.sort();
        let texts: Vec<_> = files
            .iter()
            .map(|f| std::fs::read_to_string(f).unwrap())
            .collect();
        assert_eq!(texts, MIGRATIONS);
    }
}
