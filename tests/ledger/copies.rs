//! Backups while others write, and what is left of a damaged file.

use super::{NOW, all, event, fresh, probe, reading};
use halfcell::ledger::{Batch, ChainBreak, Ledger, LedgerError, Reader, Writer, backup, salvage};
use rusqlite::Connection;
use std::io::{Seek, SeekFrom, Write};
use std::sync::mpsc;
use std::time::Duration;

#[test]
fn a_backup_made_while_the_writer_writes_is_whole_and_restores() {
    let mut f = fresh();
    let rows: Vec<_> = (0..20_000)
        .map(|t| (f.point, reading(t * 1_000, 0.5)))
        .collect();
    f.ledger.append(&rows, &[event(1, probe("P-1"))]).unwrap();
    f.ledger.seal_all(NOW).unwrap();
    let writer = Writer::start(&f.path, Duration::from_millis(1), super::writer::CLOCK).unwrap();
    for t in 0..50 {
        let rows = vec![(f.point, reading(30_000_000 + t, 0.5))];
        writer
            .push(Batch {
                rows,
                ..Batch::default()
            })
            .unwrap();
    }
    let copy = f.folder.path().join("copy.db");
    let (heard, hears) = mpsc::channel();
    let report = backup(&f.path, &copy, move |done, expected| {
        heard.send((done, expected)).unwrap();
    })
    .unwrap();
    writer.stop();
    assert!(report.is_sound(), "{report:?}");
    assert!(
        hears.iter().any(|(_, expected)| expected > 0),
        "progress is told"
    );
    assert!(report.n_readings >= 20_000);
    let there = all(&f.path, f.point);
    let copied = all(&copy, f.point);
    assert_eq!(copied, there[..copied.len()], "a prefix of what came to be");
    assert_eq!(
        std::fs::read_dir(f.folder.path())
            .unwrap()
            .filter(|e| e
                .as_ref()
                .unwrap()
                .file_name()
                .to_string_lossy()
                .contains(".part"))
            .count(),
        0
    );
    let mut restored = Ledger::open(&copy).unwrap();
    restored
        .append(&[(f.point, reading(40_000_000, 0.5))], &[])
        .unwrap();
    assert_eq!(all(&copy, f.point).len(), copied.len() + 1);
    assert!(matches!(
        backup(&f.path, &copy, |_, _| {}),
        Err(LedgerError::Exists { .. })
    ));
}

#[test]
fn salvage_of_a_sound_ledger_loses_nothing() {
    let mut f = fresh();
    let rows: Vec<_> = (0..9_000)
        .map(|t| (f.point, reading(t * 1_000, 0.5)))
        .collect();
    f.ledger.append(&rows, &[event(1, probe("P-1"))]).unwrap();
    f.ledger
        .seal_before(
            halfcell::electrode::units::Timestamp::from_ms(7_200_000),
            NOW,
        )
        .unwrap();
    let new = f.folder.path().join("new.db");
    let found = salvage(&f.path, &new, NOW).unwrap();
    assert_eq!(found.lost, [""; 0]);
    assert_eq!(
        (found.n_events, found.n_sealed, found.n_readings),
        (3, 2, 9_000)
    );
    assert_eq!(all(&new, f.point), all(&f.path, f.point));
    let report = Reader::open(&new).unwrap().audit().unwrap();
    assert!(report.is_sound(), "{report:?}");
}

#[test]
fn a_lost_sealed_hour_is_sealed_again_from_the_arrival_table() {
    let mut f = fresh();
    let rows: Vec<_> = (0..9_000)
        .map(|t| (f.point, reading(t * 1_000, 0.5)))
        .collect();
    f.ledger.append(&rows, &[]).unwrap();
    f.ledger.seal_all(NOW).unwrap();
    let before = all(&f.path, f.point);
    let db = Connection::open(&f.path).unwrap();
    db.execute_batch(
        "DROP TRIGGER sealed_is_not_changed; UPDATE sealed SET data = x'00' WHERE id = 2",
    )
    .unwrap();
    assert_eq!(
        Reader::open(&f.path).unwrap().audit().unwrap().breaks,
        [ChainBreak::PartChanged { id: 2 }]
    );
    let new = f.folder.path().join("new.db");
    let found = salvage(&f.path, &new, NOW).unwrap();
    assert_eq!(found.n_sealed, 2);
    assert_eq!(found.lost.len(), 2, "{:?}", found.lost);
    assert!(
        found.lost[1].contains("3600 were still in the arrival table"),
        "{:?}",
        found.lost
    );
    assert_eq!(all(&new, f.point), before);
    assert!(Reader::open(&new).unwrap().audit().unwrap().is_sound());
}

#[test]
fn torn_pages_cost_only_what_was_on_them() {
    let mut f = fresh();
    let rows: Vec<_> = (0..60_000)
        .map(|t| (f.point, reading(t * 1_000, 0.5)))
        .collect();
    f.ledger.append(&rows, &[event(1, probe("P-1"))]).unwrap();
    f.ledger
        .seal_before(
            halfcell::electrode::units::Timestamp::from_ms(36_000_000),
            NOW,
        )
        .unwrap();
    drop(f.ledger);
    let db = Connection::open(&f.path).unwrap();
    let leaf: i64 = db
        .query_row(
            "SELECT min(pageno) + 200 FROM dbstat WHERE name = 'reading' AND pagetype = 'leaf'",
            [],
            |row| row.get(0),
        )
        .unwrap_or(300);
    drop(db);
    let mut file = std::fs::OpenOptions::new()
        .write(true)
        .open(&f.path)
        .unwrap();
    file.seek(SeekFrom::Start(u64::try_from(leaf).unwrap() * 4_096))
        .unwrap();
    file.write_all(&[0xa5; 3 * 4_096]).unwrap();
    drop(file);
    let new = f.folder.path().join("new.db");
    let found = salvage(&f.path, &new, NOW).unwrap();
    assert!(!found.lost.is_empty());
    assert!(found.n_readings > 59_000, "{found:?}");
    assert!(all(&new, f.point).len() > 59_000);
}
