//! # Backup: a consistent copy while others write, audited before it gets its name

use super::audit::AuditReport;
use super::error::LedgerError;
use super::reader::Reader;
use super::schema;
use std::fs::File;
use std::io;
use std::path::{Path, PathBuf};

/// VM steps between two looks at how far the copy is.
const STEPS: i32 = 20_000;

/// Copies the ledger at `path` to the new file `to` and audits the copy. `progress` hears bytes written and bytes expected.
///
/// # Errors
/// [`LedgerError::Exists`]; what the database or the system says. Then there is no file at `to`.
pub fn backup(
    path: &Path,
    to: &Path,
    mut progress: impl FnMut(u64, u64) + Send + 'static,
) -> Result<AuditReport, LedgerError> {
    if to.exists() {
        return Err(LedgerError::Exists {
            path: to.to_path_buf(),
        });
    }
    let mut connection = schema::open_readable(path)?;
    let failed = |source| LedgerError::of(path, "copy the ledger", source);
    let system = |doing: &'static str| {
        move |source: io::Error| LedgerError::System {
            doing,
            path: to.to_path_buf(),
            source,
        }
    };
    let part = with_end(to, ".part");
    // One of an earlier try that was cut off.
    if part.exists() {
        std::fs::remove_file(&part).map_err(system("remove an unfinished copy"))?;
    }
    let expected: i64 = connection
        .query_row(
            "SELECT page_count * page_size FROM pragma_page_count, pragma_page_size",
            [],
            |row| row.get(0),
        )
        .map_err(failed)?;
    let expected = u64::try_from(expected).unwrap_or(0);
    let seen = part.clone();
    let look = move || {
        progress(
            std::fs::metadata(&seen).map_or(0, |file| file.len()),
            expected,
        );
        false
    };
    connection
        .progress_handler(STEPS, Some(look))
        .map_err(failed)?;
    let copied = connection
        .execute("VACUUM INTO ?", [part.to_string_lossy()])
        .map_err(failed)
        .and_then(|_| {
            let file = File::open(&part).map_err(system("open the copy"))?;
            file.sync_all().map_err(system("sync the copy"))?;
            let report = Reader::open(&part)?.audit()?;
            std::fs::rename(&part, to).map_err(system("name the copy"))?;
            let folder = match to.parent() {
                Some(folder) if !folder.as_os_str().is_empty() => folder,
                _ => Path::new("."),
            };
            File::open(folder)
                .and_then(|folder| folder.sync_all())
                .map_err(system("sync the folder"))?;
            Ok(report)
        });
    if copied.is_err() {
        // What is left of the copy is of no use; that it stays behind is no second failure.
        drop(std::fs::remove_file(&part));
    }
    copied
}

/// The path with `end` behind it.
pub(super) fn with_end(path: &Path, end: &str) -> PathBuf {
    let mut name = path.as_os_str().to_owned();
    name.push(end);
    PathBuf::from(name)
}
