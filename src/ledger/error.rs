//! # What can go wrong with a ledger

use crate::electrode::history::{EventId, ProbeKind, Tag};
use rusqlite::ErrorCode;
use std::path::{Path, PathBuf};

/// Why the ledger could not do what was asked.
#[derive(Debug, thiserror::Error)]
pub enum LedgerError {
    /// There is no file.
    #[error("there is no ledger at {}", path.display())]
    Missing {
        /// Where it was looked for.
        path: PathBuf,
    },
    /// A file is there already.
    #[error("{} is there already", path.display())]
    Exists {
        /// The file.
        path: PathBuf,
    },
    /// The file is another program's, or no database.
    #[error("{} is not a ledger", path.display())]
    NotALedger {
        /// The file.
        path: PathBuf,
    },
    /// A newer program wrote it.
    #[error("ledger {} is of version {version}; this program knows versions up to {known}", path.display())]
    Newer {
        /// The file.
        path: PathBuf,
        /// Its version.
        version: i64,
        /// The newest version known here.
        known: i64,
    },
    /// An older program wrote it and nobody brought it up yet.
    #[error("ledger {} is of version {version}; this program reads version {known}", path.display())]
    Older {
        /// The file.
        path: PathBuf,
        /// Its version.
        version: i64,
        /// The version read here.
        known: i64,
    },
    /// It lies on a network file system, where shared memory does not work.
    #[error("ledger {} lies on a network file system ({kind})", path.display())]
    NetworkFileSystem {
        /// The file.
        path: PathBuf,
        /// What the system calls it.
        kind: &'static str,
    },
    /// It cannot be written.
    #[error("ledger {} cannot be written", path.display())]
    ReadOnly {
        /// The file.
        path: PathBuf,
        /// What SQLite said.
        source: rusqlite::Error,
    },
    /// Another process holds the lock.
    #[error("ledger {} is locked by another process", path.display())]
    Locked {
        /// The file.
        path: PathBuf,
        /// What SQLite said.
        source: rusqlite::Error,
    },
    /// The disk is full.
    #[error("no room left on the disk of ledger {}", path.display())]
    Full {
        /// The file.
        path: PathBuf,
        /// What SQLite said.
        source: rusqlite::Error,
    },
    /// Anything else the database said.
    #[error("cannot {doing} in ledger {}", path.display())]
    Database {
        /// What was being done.
        doing: &'static str,
        /// The file.
        path: PathBuf,
        /// What SQLite said.
        source: rusqlite::Error,
    },
    /// A sealed hour is not what was sealed.
    #[error("sealed part {id} in ledger {} is damaged: {what}", path.display())]
    DamagedPart {
        /// Its number.
        id: i64,
        /// The file.
        path: PathBuf,
        /// What is wrong with it.
        what: String,
    },
    /// The system refused.
    #[error("cannot {doing} for ledger {}", path.display())]
    System {
        /// What was being done.
        doing: &'static str,
        /// The file.
        path: PathBuf,
        /// What the system said.
        source: std::io::Error,
    },
    /// An event does not come back from its text as it went in, as when a figure is not finite.
    #[error("event does not come back from its text as it went in: {text}")]
    UnstorableEvent {
        /// Its text.
        text: String,
    },
    /// A recorded event is not understood.
    #[error("event {id} cannot be understood")]
    UnreadableEvent {
        /// Its number.
        id: EventId,
        /// What is wrong with its text.
        source: serde_json::Error,
    },
    /// A point measured something else so far.
    #[error("point `{tag}` holds {there} readings and cannot hold {asked} readings")]
    OtherQuantity {
        /// The point.
        tag: Tag,
        /// What it holds.
        there: ProbeKind,
        /// What was to be added.
        asked: ProbeKind,
    },
}

impl LedgerError {
    /// What to do about it, as an order to the reader.
    pub const fn remedy(&self) -> &'static str {
        match self {
            Self::Missing { .. } => {
                "start the daemon once, or name the ledger with `--ledger FILE`"
            }
            Self::Exists { .. } => "name a file that is not there yet",
            Self::NotALedger { .. } => "name another file with `--ledger FILE`",
            Self::Newer { .. } => "install the version of halfcell that wrote it, or a newer one",
            Self::Older { .. } => "start the daemon once to bring the ledger up to this version",
            Self::NetworkFileSystem { .. } => {
                "move the ledger to a local disk and set `ledger` in `[site]`"
            }
            Self::ReadOnly { .. } => {
                "give this user write permission for the file and its folder, and mount the disk writable"
            }
            Self::Locked { .. } => "end the process that holds the lock, or try again",
            Self::Full { .. } => "make room on the disk",
            Self::Database { .. } | Self::UnreadableEvent { .. } | Self::DamagedPart { .. } => {
                "run `halfcell audit` and restore a backup if it finds damage"
            }
            Self::System { .. } => "check the path and its permissions",
            Self::UnstorableEvent { .. } => "enter finite figures",
            Self::OtherQuantity { .. } => "give the point another tag in the configuration",
        }
    }

    /// Sorts what SQLite said.
    pub(super) fn of(path: &Path, doing: &'static str, source: rusqlite::Error) -> Self {
        let path = path.to_path_buf();
        match source.sqlite_error_code() {
            Some(ErrorCode::ReadOnly | ErrorCode::PermissionDenied) => {
                Self::ReadOnly { path, source }
            }
            Some(ErrorCode::DatabaseBusy | ErrorCode::DatabaseLocked) => {
                Self::Locked { path, source }
            }
            Some(ErrorCode::DiskFull) => Self::Full { path, source },
            Some(ErrorCode::NotADatabase) => Self::NotALedger { path },
            _ => Self::Database {
                doing,
                path,
                source,
            },
        }
    }
}
