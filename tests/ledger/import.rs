//! Imported rows are kept once.

use super::{NOW, all, fresh, reading};
use halfcell::ledger::{Imported, Reader};

#[test]
fn the_same_import_twice_gives_the_same_ledger() {
    let mut f = fresh();
    // Unordered, over several transactions.
    let rows: Vec<_> = (0..50_000_i64)
        .map(|n| (f.point, reading(n * 7_919 % 50_021 * 1_000, 0.1)))
        .collect();
    assert_eq!(
        f.ledger.import(&rows, NOW).unwrap(),
        Imported {
            kept: 50_000,
            repeated: 0,
            conflicting: 0
        }
    );
    let once = all(&f.path, f.point);
    assert_eq!(
        f.ledger.import(&rows, NOW).unwrap(),
        Imported {
            kept: 0,
            repeated: 50_000,
            conflicting: 0
        }
    );
    assert_eq!(all(&f.path, f.point), once);
    assert_eq!(once.len(), 50_000);
}

#[test]
fn repeated_and_conflicting_rows_of_one_file_are_told_apart() {
    let mut f = fresh();
    let rows = [
        (f.point, reading(1_000, 1.0)),
        (f.point, reading(1_000, 1.0)),
        (f.point, reading(1_000, 2.0)),
        (f.point, reading(1_000, 2.0)),
    ];
    assert_eq!(
        f.ledger.import(&rows, NOW).unwrap(),
        Imported {
            kept: 2,
            repeated: 2,
            conflicting: 1
        }
    );
    let later = [(f.point, reading(1_000, 3.0))];
    assert_eq!(
        f.ledger.import(&later, NOW).unwrap(),
        Imported {
            kept: 1,
            repeated: 0,
            conflicting: 1
        }
    );
}

#[test]
fn backfill_does_not_hide_the_newest_reading() {
    let mut f = fresh();
    f.ledger
        .append(&[(f.point, reading(5_000, 1.0))], &[])
        .unwrap();
    f.ledger
        .import(&[(f.point, reading(1_000, 2.0))], NOW)
        .unwrap();
    let newest = || {
        Reader::open(&f.path)
            .unwrap()
            .newest(f.point, None)
            .unwrap()
            .unwrap()
            .0
    };
    assert_eq!(newest(), 1);
    f.ledger
        .import(&[(f.point, reading(6_000, 2.0))], NOW)
        .unwrap();
    assert_eq!(newest(), 3);
}
