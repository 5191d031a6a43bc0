//! Lines come and go, calibrations are taken up, and no other line notices.

use crate::harness::{PATIENCE, Ponds, events, rows, taken_up_after_ms, until};
use halfcell::ledger::event::Body;
use halfcell::watch::flags::Flag;
use std::time::Duration;

#[test]
fn a_calibration_typed_beside_the_running_daemon_is_taken_up_at_once() {
    let ponds = Ponds::new().with_probes();
    let _daemon = ponds.run();
    let last = || rows(&ponds.ledger(), "POND-A").last().map(|(_, r)| *r);
    let (before, _) = until("a first value", PATIENCE, || {
        last().filter(|r| r.value.is_some())
    });
    // −23.4 mV at 18.2 °C by offset and slope of the first calibration: between pH 7 and 8.
    assert!((7.0..8.0).contains(&before.value.unwrap()), "{before:?}");
    ponds.calibrate(174.0);
    let (after, _) = until("the new calibration", PATIENCE, || {
        last().filter(|r| r.calibration != before.calibration)
    });
    assert!(after.calibration > before.calibration);
    let taken_up = taken_up_after_ms(&ponds.ledger(), "POND-A").unwrap();
    // At most 2 s on a machine of its own; here a dozen other tests share two cores.
    println!("taken up after {taken_up} ms");
    assert!(taken_up <= 5_000, "after {taken_up} ms");
    assert!(
        (after.value.unwrap() - before.value.unwrap()).abs() > 0.005,
        "{before:?} {after:?}"
    );
}

#[test]
fn an_unplugged_line_resumes_by_itself_and_the_gap_is_an_event() {
    let mut ponds = Ponds::new().with_probes();
    let _daemon = ponds.run();
    let n = |ponds: &Ponds, tag: &str| {
        rows(&ponds.ledger(), tag)
            .iter()
            .filter(|(_, r)| r.mv.is_some())
            .count()
    };
    until("readings of both ponds", PATIENCE, || {
        (n(&ponds, "POND-A") > 1 && n(&ponds, "POND-B") > 1).then_some(())
    });
    let lost = |ponds: &Ponds| {
        events(&ponds.ledger())
            .into_iter()
            .find(|e| matches!(&e.body, Body::LineLost { line, .. } if line == "line-a"))
    };
    ponds.lines[0].unplug().unwrap();
    until("the loss to be an event", PATIENCE, || lost(&ponds));
    let (a, b) = (n(&ponds, "POND-A"), n(&ponds, "POND-B"));
    until("the other line to go on meanwhile", PATIENCE, || {
        (n(&ponds, "POND-B") > b + 1).then_some(())
    });
    assert!(
        n(&ponds, "POND-A") <= a + 1,
        "an unplugged line gives nothing"
    );
    ponds.lines[0].plug().unwrap();
    let ((), took) = until("readings again", PATIENCE, || {
        (n(&ponds, "POND-A") > a + 1).then_some(())
    });
    assert!(took <= Duration::from_secs(5), "it took {took:?}");
    let back = events(&ponds.ledger())
        .into_iter()
        .find(|e| matches!(&e.body, Body::LineBack { line, .. } if line == "line-a"));
    assert!(back.is_some(), "{:?}", events(&ponds.ledger()));
    let other = events(&ponds.ledger())
        .into_iter()
        .find(|e| matches!(&e.body, Body::LineLost { line, .. } if line == "line-b"));
    assert_eq!(other, None);
}

#[test]
fn a_line_that_is_not_there_is_an_event_and_a_row_says_that_nothing_comes() {
    let mut ponds = Ponds::new().with_probes();
    ponds.lines[0].unplug().unwrap();
    let _daemon = ponds.run();
    let missing = || {
        rows(&ponds.ledger(), "POND-A")
            .into_iter()
            .find(|(_, r)| r.flag == Flag::Missing)
    };
    let ((_, row), _) = until("a row without a reading", PATIENCE, missing);
    assert_eq!((row.mv, row.tests.to_string().as_str()), (None, "gap"));
    assert!(
        events(&ponds.ledger())
            .iter()
            .any(|e| matches!(&e.body, Body::LineLost { line, .. } if line == "line-a"))
    );
}

#[test]
fn the_counts_of_a_line_are_shown_beside_the_running_daemon() {
    let ponds = Ponds::new();
    let _daemon = ponds.run();
    let shown = || {
        let said = ponds.says(&["status", "--lines", "--json"]);
        let said: serde_json::Value = serde_json::from_slice(&said.stdout).ok()?;
        let line = said["lines"][0].clone();
        (line["samples"].as_u64()? >= 5).then_some(line)
    };
    // The counts are written when the port opens and every ten seconds from then on.
    let (line, _) = until("five samples counted", PATIENCE, shown);
    assert_eq!(
        (&line["line"], &line["lost"]),
        (&"line-a".into(), &serde_json::Value::Null)
    );
    assert_eq!(line["meters"][0]["meter"], "meter-a");
    assert_eq!(line["samples"], line["meters"][0]["samples"]);
    let rejected: u64 = line["rejected"]
        .as_object()
        .unwrap()
        .values()
        .map(|n| n.as_u64().unwrap())
        .sum();
    assert_eq!(
        line["lines"].as_u64().unwrap(),
        line["samples"].as_u64().unwrap() + rejected
    );
}
