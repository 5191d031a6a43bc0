//! Events are appended, chained, never changed; the audit says where they were.

use super::{Fresh, event, fresh, probe, reading};
use halfcell::ledger::{ChainBreak, Reader};
use rusqlite::Connection;

fn with_three_events() -> Fresh {
    let mut f = fresh();
    for id in ["P-1", "P-2", "P-3"] {
        f.ledger.record(event(1_000, probe(id))).unwrap();
    }
    f
}

#[test]
fn an_untouched_ledger_is_sound() {
    let f = with_three_events();
    let report = Reader::open(&f.path).unwrap().audit().unwrap();
    assert!(report.is_sound(), "{report:?}");
    assert_eq!(report.n_events, 3);
}

#[test]
fn events_and_readings_cannot_be_changed() {
    let mut f = with_three_events();
    f.ledger.append(&[(f.point, reading(1, 1.0))], &[]).unwrap();
    let db = Connection::open(&f.path).unwrap();
    for sql in [
        "UPDATE event SET by = 'x'",
        "DELETE FROM event",
        "UPDATE reading SET mv_uv = 0",
    ] {
        assert!(db.execute(sql, []).is_err(), "{sql}");
    }
}

#[test]
fn a_changed_and_a_missing_event_are_named() {
    for (sql, found) in [
        (
            "UPDATE event SET by = 'x' WHERE id = 2",
            ChainBreak::Changed { id: 2 },
        ),
        (
            "DELETE FROM event WHERE id = 2",
            ChainBreak::Missing { from: 2, to: 2 },
        ),
        (
            "DELETE FROM event WHERE id = 3",
            ChainBreak::Missing { from: 3, to: 3 },
        ),
    ] {
        let f = with_three_events();
        let db = Connection::open(&f.path).unwrap();
        db.execute_batch("DROP TRIGGER event_is_not_changed; DROP TRIGGER event_is_not_deleted")
            .unwrap();
        db.execute(sql, []).unwrap();
        assert_eq!(
            Reader::open(&f.path).unwrap().audit().unwrap().breaks,
            [found],
            "{sql}"
        );
    }
}
