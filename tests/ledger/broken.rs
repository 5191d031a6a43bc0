//! Files that cannot be used are refused by name.

use super::fresh;
use halfcell::ledger::{Ledger, LedgerError, Reader};
use rusqlite::Connection;

#[test]
fn a_ledger_of_a_newer_version_is_refused_by_name() {
    let f = fresh();
    Connection::open(&f.path)
        .unwrap()
        .pragma_update(None, "user_version", 99)
        .unwrap();
    for refused in [
        Ledger::open(&f.path).unwrap_err(),
        Reader::open(&f.path).unwrap_err(),
    ] {
        assert!(
            matches!(refused, LedgerError::Newer { version: 99, .. }),
            "{refused}"
        );
    }
}

#[test]
fn another_programs_database_is_refused_and_left_alone() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("other.db");
    Connection::open(&path)
        .unwrap()
        .execute_batch("CREATE TABLE t(a)")
        .unwrap();
    let before = std::fs::read(&path).unwrap();
    assert!(matches!(
        Ledger::open(&path),
        Err(LedgerError::NotALedger { .. })
    ));
    assert_eq!(std::fs::read(&path).unwrap(), before);
    std::fs::write(&path, "no database at all, but long enough to look at").unwrap();
    assert!(matches!(
        Ledger::open(&path),
        Err(LedgerError::NotALedger { .. })
    ));
}

#[test]
fn a_reader_makes_no_file() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("none.db");
    assert!(matches!(
        Reader::open(&path),
        Err(LedgerError::Missing { .. })
    ));
    assert!(!path.exists());
}
