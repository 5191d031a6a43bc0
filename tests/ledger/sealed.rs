//! Closed hours become blobs; no answer changes by it.

use super::{Fresh, NOW, all, event, fresh, reading};
use halfcell::electrode::history::ProbeKind;
use halfcell::electrode::units::Timestamp;
use halfcell::ledger::event::Body;
use halfcell::ledger::{ChainBreak, Ledger, Reader};
use halfcell::watch::reading::{Reading, round_value};
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

#[test]
fn a_chart_from_roll_ups_says_what_the_readings_say() {
    let f = fresh();
    let rows: Vec<_> = (0..3_000_i64)
        .map(|n| {
            let value = (n % 11 != 0).then(|| {
                round_value(
                    ProbeKind::Ph,
                    7.0 + f64::from(i32::try_from(n % 97).unwrap()) / 100.0,
                )
            });
            let row = Reading {
                value,
                ..reading(n * 29_000 + n % 7, 0.5)
            };
            (f.point, row)
        })
        .collect();
    // From readings (10 s), minutes (10 min) and hours (2 h); open, half sealed, all sealed.
    for (n, hours) in [(720, 2), (12, 2), (10, 20)] {
        let mut f = fresh();
        f.ledger.append(&rows, &[]).unwrap();
        let reader = Reader::open(&f.path).unwrap();
        let span_ms = hours * HOUR_MS;
        let mut before = None;
        for seal in [0, HOUR_MS + 60_000, 30 * HOUR_MS] {
            f.ledger.seal_before(Timestamp::from_ms(seal), NOW).unwrap();
            let chart = reader
                .chart(
                    f.point,
                    Timestamp::from_ms(0),
                    Timestamp::from_ms(span_ms),
                    n,
                )
                .unwrap();
            assert_eq!(chart.len(), n as usize);
            let total: u64 = chart.iter().map(|bucket| bucket.n).sum();
            let expected = rows
                .iter()
                .filter(|(_, r)| r.at.ms() < span_ms && r.value.is_some())
                .count();
            assert_eq!(total, expected as u64);
            for (at, bucket) in chart.iter().enumerate() {
                let end = chart.get(at + 1).map_or(span_ms, |next| next.from.ms());
                let inside = rows
                    .iter()
                    .filter(|(_, r)| (bucket.from.ms()..end).contains(&r.at.ms()));
                let values: Vec<f64> = inside.clone().filter_map(|(_, r)| r.value).collect();
                assert_eq!(bucket.n, values.len() as u64, "{n} {seal} {at}");
                assert_eq!(bucket.flag.is_some(), inside.count() > 0);
                let lo = values.iter().copied().reduce(f64::min);
                assert_eq!((bucket.lo, bucket.u_hi), (lo, lo.map(|_| 0.041_237)));
                assert_eq!(bucket.hi, values.iter().copied().reduce(f64::max));
            }
            assert_eq!(
                *before.get_or_insert(chart.clone()),
                chart,
                "sealing changes no chart"
            );
        }
    }
}

#[test]
fn the_audit_says_which_sealed_hour_was_changed_or_removed_and_holds_an_anchor() {
    let mut f = fresh();
    minutes(&mut f, 0, 180);
    f.ledger.seal_all(NOW).unwrap();
    let reader = Reader::open(&f.path).unwrap();
    let report = reader.audit().unwrap();
    assert!(report.is_sound(), "{report:?}");
    assert_eq!((report.n_sealed, report.n_readings), (3, 180));
    let head = report.head.unwrap();
    minutes(&mut f, 4 * HOUR_MS, 60);
    f.ledger.seal_all(NOW).unwrap();
    let held = reader.audit_from(Some(&head)).unwrap();
    assert!(held.is_sound() && held.anchor == Some(3), "{held:?}");
    let strange = reader.audit_from(Some(&"0".repeat(64))).unwrap();
    assert_eq!(strange.breaks, [ChainBreak::Anchor]);

    let db = Connection::open(&f.path).unwrap();
    db.execute_batch("DROP TRIGGER sealed_is_not_changed; DROP TRIGGER sealed_is_not_deleted; DROP TRIGGER reading_is_pruned_only_when_sealed")
        .unwrap();
    let other =
        "(SELECT data FROM sealed WHERE id = 3), sha256 = (SELECT sha256 FROM sealed WHERE id = 3)";
    db.execute(
        &format!("UPDATE sealed SET data = {other} WHERE id = 2"),
        [],
    )
    .unwrap();
    db.execute("DELETE FROM sealed WHERE id = 4", []).unwrap();
    assert_eq!(
        reader.audit().unwrap().breaks,
        [
            ChainBreak::PartChanged { id: 2 },
            ChainBreak::PartMissing { event: 4 },
            ChainBreak::ReadingsMissing { n: 60 },
        ]
    );
}

#[test]
fn a_script_written_from_the_documentation_alone_reads_sealed_hours() {
    let has = |program: &str| {
        std::process::Command::new(program)
            .arg("--version")
            .output()
            .is_ok()
    };
    if !has("python3") || !has("zstd") {
        println!("python3 or zstd is missing: the layout was not read by another program");
        return;
    }
    let mut f = fresh();
    let rows: Vec<_> = (0..5_000_i32)
        .map(|n| {
            let row = Reading {
                mv: (n % 13 != 0).then(|| -177.0 + f64::from(n % 41) / 10.0),
                value: None,
                u: (n > 4_000).then_some(0.03),
                calibration: (n % 2 == 0).then_some(i64::from(n / 1_000)),
                ..reading(i64::from(n) * 1_000 + i64::from(n % 5), 0.0)
            };
            (f.point, row)
        })
        .collect();
    f.ledger.append(&rows, &[]).unwrap();
    f.ledger.seal_all(NOW).unwrap();
    let script = concat!(env!("CARGO_MANIFEST_DIR"), "/tests/ledger/read_sealed.py");
    let read = std::process::Command::new("python3")
        .args([script.as_ref(), f.path.as_os_str(), "1".as_ref()])
        .output()
        .unwrap();
    assert!(
        read.status.success(),
        "{}",
        String::from_utf8_lossy(&read.stderr)
    );
    let read = String::from_utf8(read.stdout).unwrap();
    let expected: Vec<String> = Connection::open(&f.path)
        .unwrap()
        .prepare(
            "SELECT concat_ws(',', seq, t_ms, ifnull(mv_uv, ''), ifnull(temp_mc, ''), ifnull(value_u, ''), ifnull(u_u, ''),
               ifnull(calibration_id, ''), flags) FROM reading ORDER BY t_ms / 3600000, seq",
        )
        .unwrap()
        .query_map([], |row| row.get(0))
        .unwrap()
        .map(Result::unwrap)
        .collect();
    assert_eq!(read.lines().collect::<Vec<_>>(), expected);
}
