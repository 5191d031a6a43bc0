//! A ledger of an older version comes up equal to a fresh one.
//!
//! `fixtures/0001.db` was made by the program of version 1 of the tables (migration 0001 alone): [`fill`] on a fresh ledger,
//! then a checkpoint and a copy of the file.

use super::{Fresh, NOW, all, event, fresh, probe, reading};
use halfcell::electrode::history::{ProbeKind, Tag};
use halfcell::electrode::units::Timestamp;
use halfcell::ledger::event::Body;
use halfcell::ledger::{Ledger, Reader};
use halfcell::watch::reading::Reading;
use rusqlite::Connection;
use std::path::Path;

/// Two points over the turn of an hour, events, a step of the clock, a row without figures.
fn fill(f: &mut Fresh) {
    let orp = f
        .ledger
        .point(&Tag::from("TANK-1"), ProbeKind::Orp)
        .unwrap();
    f.ledger.record(event(1_000, probe("P-1"))).unwrap();
    let mut rows = Vec::new();
    for n in 0..300_i32 {
        let t = 3_500_000 + i64::from(n) * 1_000;
        rows.push((f.point, reading(t, -177.0 - 0.1 * f64::from(n % 7))));
        if n % 5 == 0 {
            let row = Reading {
                value: Some(412.3),
                calibration: None,
                ..reading(t + 3, 412.3)
            };
            rows.push((orp, row));
        }
    }
    f.ledger.append(&rows, &[]).unwrap();
    let step = Body::ClockStep {
        before: Timestamp::from_ms(3_800_000),
        after: Timestamp::from_ms(3_550_000),
        seq: 0,
    };
    let bare = Reading {
        mv: None,
        value: None,
        u: None,
        ..reading(3_550_000, 0.0)
    };
    f.ledger
        .append(&[(f.point, bare)], &[event(3_550_000, step)])
        .unwrap();
}

/// Everything that can be asked, as text; with the tables themselves.
fn content(path: &Path) -> String {
    let reader = Reader::open(path).unwrap();
    assert!(reader.audit().unwrap().is_sound());
    let mut text = vec![format!("{:?}", reader.events(0).unwrap())];
    for (tag, point) in reader.points().unwrap() {
        text.push(format!("{tag} {:?}", all(path, point)));
        for t in [0, 3_550_000, 3_599_999, 3_700_000, 4_000_000] {
            let at = Some(Timestamp::from_ms(t));
            text.push(format!("{t} {:?}", reader.newest(point, at).unwrap()));
        }
        text.push(format!("{:?}", reader.newest(point, None).unwrap()));
    }
    let db = Connection::open(path).unwrap();
    let mut rows = db
        .prepare("SELECT sql FROM sqlite_schema WHERE sql NOT NULL ORDER BY name")
        .unwrap();
    let tables = rows.query_map([], |row| row.get(0)).unwrap();
    text.extend(tables.map(Result::unwrap));
    text.join("\n")
}

#[test]
fn a_ledger_of_version_1_comes_up_equal_to_a_fresh_one_sealed_or_not() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("old.db");
    std::fs::copy(
        concat!(env!("CARGO_MANIFEST_DIR"), "/tests/ledger/fixtures/0001.db"),
        &path,
    )
    .unwrap();
    let mut old = Ledger::open(&path).unwrap();
    let mut new = fresh();
    fill(&mut new);
    let before = content(&path);
    assert_eq!(before, content(&new.path));
    old.seal_all(NOW).unwrap();
    new.ledger.seal_all(NOW).unwrap();
    assert_eq!(content(&path), content(&new.path));
    assert_eq!(content(&path), before, "sealing changes no answer");
}
