//! What is written comes back as it went.

use super::{all, event, fresh, probe, reading};
use halfcell::electrode::history::{ProbeKind, Tag};
use halfcell::electrode::units::Timestamp;
use halfcell::ledger::event::Body;
use halfcell::ledger::{LedgerError, Reader};
use halfcell::watch::reading::Reading;

#[test]
fn a_reading_comes_back_with_its_sequence_number_and_every_field() {
    let mut f = fresh();
    let bare = Reading {
        mv: None,
        temp_c: None,
        value: None,
        u: None,
        calibration: None,
        ..reading(2_000, 0.0)
    };
    let appended = f
        .ledger
        .append(&[(f.point, reading(1_000, -177.481)), (f.point, bare)], &[])
        .unwrap();
    assert_eq!((appended.first_seq, appended.last_seq), (1, 2));
    assert_eq!(
        all(&f.path, f.point),
        [(1, reading(1_000, -177.481)), (2, bare)]
    );
    assert_eq!(
        Reader::open(&f.path).unwrap().points().unwrap(),
        [(Tag::from("POND-3"), f.point)]
    );
}

#[test]
fn a_clock_that_steps_back_loses_no_row_and_its_event_names_the_first_row_after_it() {
    let mut f = fresh();
    f.ledger
        .append(
            &[
                (f.point, reading(9_000, 1.0)),
                (f.point, reading(10_000, 2.0)),
            ],
            &[],
        )
        .unwrap();
    let step = Body::ClockStep {
        before: Timestamp::from_ms(11_000),
        after: Timestamp::from_ms(9_000),
        seq: 0,
    };
    f.ledger
        .append(
            &[
                (f.point, reading(9_000, 3.0)),
                (f.point, reading(10_000, 4.0)),
            ],
            &[event(9_000, step)],
        )
        .unwrap();
    let rows = all(&f.path, f.point);
    assert_eq!(
        rows.iter().map(|(seq, _)| *seq).collect::<Vec<_>>(),
        [1, 3, 2, 4],
        "by time, then by sequence"
    );
    let reader = Reader::open(&f.path).unwrap();
    assert!(matches!(
        reader.events(0).unwrap()[0].body,
        Body::ClockStep { seq: 3, .. }
    ));
    assert_eq!(reader.newest(f.point, None).unwrap().unwrap().0, 4);
    assert_eq!(
        reader
            .newest(f.point, Some(Timestamp::from_ms(9_500)))
            .unwrap()
            .unwrap()
            .0,
        3
    );
    assert_eq!(
        reader
            .newest(f.point, Some(Timestamp::from_ms(8_999)))
            .unwrap(),
        None
    );
}

#[test]
fn an_event_comes_back_and_the_book_knows_only_what_was_so_by_then() {
    let mut f = fresh();
    let recorded = f.ledger.record(event(1_000, probe("P-1"))).unwrap();
    f.ledger.record(event(2_000, probe("P-2"))).unwrap();
    let reader = Reader::open(&f.path).unwrap();
    assert_eq!(reader.events(0).unwrap()[0], recorded);
    assert_eq!(reader.events(recorded.id).unwrap().len(), 1);
    assert_eq!(
        reader
            .book(Some(Timestamp::from_ms(1_999)))
            .unwrap()
            .probes()
            .count(),
        1
    );
    assert_eq!(reader.book(None).unwrap().probes().count(), 2);
}

#[test]
fn a_refused_check_writes_nothing_and_another_connection_sees_a_commit() {
    let mut f = fresh();
    let reader = Reader::open(&f.path).unwrap();
    let before = reader.data_version().unwrap();
    let refused = f
        .ledger
        .record_checked(|book| Err::<_, usize>(book.probes().count()))
        .unwrap();
    assert_eq!(refused, Err(0));
    assert_eq!(reader.data_version().unwrap(), before);
    f.ledger
        .record_checked(|_| Ok::<_, ()>(event(1, probe("P-1"))))
        .unwrap()
        .unwrap();
    assert_ne!(reader.data_version().unwrap(), before);
    assert_eq!(reader.events(0).unwrap().len(), 1);
}

#[test]
fn a_point_keeps_its_quantity() {
    let mut f = fresh();
    assert_eq!(
        f.ledger.point(&Tag::from("POND-3"), ProbeKind::Ph).unwrap(),
        f.point
    );
    let refused = f
        .ledger
        .point(&Tag::from("POND-3"), ProbeKind::Orp)
        .unwrap_err();
    assert!(
        matches!(refused, LedgerError::OtherQuantity { .. }),
        "{refused}"
    );
}

#[test]
fn an_event_with_a_figure_that_is_not_finite_is_refused() {
    let mut f = fresh();
    let Body::ProbeAdded(mut spec) = probe("P-1") else {
        panic!("not a probe")
    };
    spec.ph_iso = f64::NAN;
    let refused = f
        .ledger
        .record(event(1, Body::ProbeAdded(spec)))
        .unwrap_err();
    assert!(
        matches!(refused, LedgerError::UnstorableEvent { .. }),
        "{refused}"
    );
}
