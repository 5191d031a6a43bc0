//! Closed hours become blobs; no answer changes by it.

use super::{Fresh, NOW, all, event, fresh, reading};
use halfcell::electrode::units::Timestamp;
use halfcell::ledger::event::Body;
use halfcell::ledger::{Ledger, Reader};
use halfcell::watch::reading::Reading;
use rusqlite::Connection;

const HOUR_MS: i64 = 3_600_000;

fn parts(f: &Fresh) -> Vec<(i64, i64, i64)> {
    Connection::open(&f.path)
        .unwrap()
        .prepare("SELECT hour, part, n FROM sealed ORDER BY hour, part")
        .unwrap()
        .query_map([], |row| Ok((row.get(0)?, row.get(1)?, row.get(2)?)))
        .unwrap()
        .map(Result::unwrap)
        .collect()
}

fn sound(f: &Fresh) {
    let report = Reader::open(&f.path).unwrap().audit().unwrap();
    assert!(report.is_sound(), "{report:?}");
}

/// Rows each minute from `from` on.
fn minutes(f: &mut Fresh, from: i64, n: i64) {
    let rows: Vec<_> = (0..n)
        .map(|i| (f.point, reading(from + i * 60_000, 0.5)))
        .collect();
    f.ledger.append(&rows, &[]).unwrap();
}

#[test]
fn an_hour_is_sealed_once_however_often_it_is_asked_for() {
    let mut f = fresh();
    minutes(&mut f, 0, 90);
    let before = all(&f.path, f.point);
    for _ in 0..3 {
        f.ledger
            .seal_before(Timestamp::from_ms(HOUR_MS), NOW)
            .unwrap();
        assert_eq!(parts(&f), [(0, 0, 60)]);
        assert_eq!(all(&f.path, f.point), before);
    }
    // Another process that seals the same at the same time finds it done.
    let mut other = Ledger::open(&f.path).unwrap();
    other.seal_before(Timestamp::from_ms(HOUR_MS), NOW).unwrap();
    assert_eq!(parts(&f), [(0, 0, 60)]);
    sound(&f);
}

#[test]
fn rows_for_a_sealed_hour_become_its_next_part() {
    let mut f = fresh();
    minutes(&mut f, 0, 90);
    f.ledger
        .seal_before(Timestamp::from_ms(HOUR_MS), NOW)
        .unwrap();
    f.ledger
        .import(&[(f.point, reading(30_500, 9.0))], NOW)
        .unwrap();
    f.ledger.seal_all(NOW).unwrap();
    assert_eq!(parts(&f), [(0, 0, 60), (0, 1, 1), (1, 0, 30)]);
    let rows = all(&f.path, f.point);
    assert_eq!((rows[0].0, rows[1].0, rows[2].0), (1, 91, 2));
    sound(&f);
}

#[test]
fn a_clock_that_steps_by_an_hour_or_a_day_loses_and_doubles_nothing() {
    for step in [-24 * HOUR_MS, -HOUR_MS, HOUR_MS, 24 * HOUR_MS] {
        let mut f = fresh();
        let start = 100 * 24 * HOUR_MS;
        minutes(&mut f, start, 100);
        let after = start + 100 * 60_000 + step;
        let rows: Vec<_> = (0..100)
            .map(|i| (f.point, reading(after + i * 60_000, 1.5)))
            .collect();
        let event = event(
            after,
            Body::ClockStep {
                before: Timestamp::from_ms(after - step),
                after: Timestamp::from_ms(after),
                seq: 0,
            },
        );
        f.ledger.append(&rows, &[event]).unwrap();
        let before = all(&f.path, f.point);
        assert_eq!(before.len(), 200, "{step}");
        f.ledger.seal_all(NOW).unwrap();
        assert_eq!(all(&f.path, f.point), before, "{step}");
        let reader = Reader::open(&f.path).unwrap();
        assert_eq!(
            reader.newest(f.point, None).unwrap().unwrap().0,
            200,
            "{step}: the newest is the last to arrive"
        );
        let latest = before.iter().map(|(_, r)| r.at).max().unwrap();
        let last = reader.newest(f.point, Some(NOW)).unwrap().unwrap();
        assert_eq!(last.1.at, latest, "{step}: by time the latest");
        sound(&f);
    }
}

#[test]
fn a_reader_that_began_before_sealing_and_pruning_reads_on_undisturbed() {
    let mut f = fresh();
    minutes(&mut f, 0, 300);
    let before = all(&f.path, f.point);
    let reader = Reader::open(&f.path).unwrap();
    let mut seen = Vec::new();
    reader
        .readings(
            f.point,
            Timestamp::from_ms(0),
            Timestamp::from_ms(10 * HOUR_MS),
            |seq, row: Reading| {
                if seen.len() == 70 {
                    f.ledger.seal_all(NOW).unwrap();
                    while f.ledger.prune_some(NOW).unwrap() {}
                }
                seen.push((seq, row));
                std::ops::ControlFlow::Continue(())
            },
        )
        .unwrap();
    assert_eq!(seen, before);
    assert_eq!(all(&f.path, f.point), before);
}

#[test]
fn only_sealed_rows_are_pruned() {
    let mut f = fresh();
    minutes(&mut f, 0, 300);
    let before = all(&f.path, f.point);
    f.ledger
        .seal_before(Timestamp::from_ms(2 * HOUR_MS), NOW)
        .unwrap();
    while f.ledger.prune_some(NOW).unwrap() {}
    let db = Connection::open(&f.path).unwrap();
    let left: i64 = db
        .query_row("SELECT count(*) FROM reading", [], |row| row.get(0))
        .unwrap();
    assert_eq!(left, 300 - 120);
    assert!(
        db.execute("DELETE FROM reading", []).is_err(),
        "open rows cannot be deleted"
    );
    for sql in ["DELETE FROM sealed", "UPDATE sealed SET n = 0"] {
        assert!(db.execute(sql, []).is_err(), "{sql}");
    }
    assert_eq!(all(&f.path, f.point), before);
}

#[test]
fn importing_again_over_sealed_hours_keeps_nothing_twice() {
    let mut f = fresh();
    let rows: Vec<_> = (0..30_000_i64)
        .map(|n| (f.point, reading(n * 7_919 % 30_011 * 1_000, 0.1)))
        .collect();
    assert_eq!(f.ledger.import(&rows, NOW).unwrap().kept, 30_000);
    f.ledger.seal_all(NOW).unwrap();
    let once = all(&f.path, f.point);
    for _ in 0..2 {
        let again = f.ledger.import(&rows, NOW).unwrap();
        assert_eq!(
            (again.kept, again.repeated, again.conflicting),
            (0, 30_000, 0)
        );
        while f.ledger.prune_some(NOW).unwrap() {}
    }
    let other = f
        .ledger
        .import(&[(f.point, reading(5_000, 0.2))], NOW)
        .unwrap();
    assert_eq!((other.kept, other.conflicting), (1, 1));
    assert_eq!(all(&f.path, f.point).len(), once.len() + 1);
    sound(&f);
}
