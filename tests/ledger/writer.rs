//! The writer acknowledges after the commit only, and loses nothing while it must wait.

use super::{all, event, fresh, probe, reading};
use halfcell::daemon::clock;
use halfcell::ledger::{Batch, Clock, Reader, Writer, WriterStatus};
use rusqlite::Connection;
use std::time::Duration;
use tokio::sync::watch::Receiver;

pub(super) const CLOCK: Clock = Clock {
    now: clock::now,
    instant: clock::instant,
};

/// Waits for a state of the writer, ten seconds at most.
pub(super) fn wait_until(
    status: &mut Receiver<WriterStatus>,
    reached: impl FnMut(&WriterStatus) -> bool,
) -> WriterStatus {
    tokio::runtime::Builder::new_current_thread()
        .enable_time()
        .build()
        .unwrap()
        .block_on(async {
            tokio::time::timeout(Duration::from_secs(10), status.wait_for(reached))
                .await
                .unwrap()
                .unwrap()
                .clone()
        })
}

#[test]
fn what_is_acknowledged_can_be_read() {
    let f = fresh();
    let writer = Writer::start(&f.path, Duration::from_millis(50), CLOCK).unwrap();
    for n in 0..10 {
        let ticket = writer
            .push(Batch {
                rows: vec![(f.point, reading(n, 1.0))],
                events: vec![],
                ..Batch::default()
            })
            .unwrap();
        let status = wait_until(&mut writer.status(), |s| s.committed >= ticket);
        assert!(
            all(&f.path, f.point)
                .iter()
                .any(|(seq, _)| *seq == status.last_seq)
        );
    }
}

#[test]
fn stopping_commits_what_waits() {
    let f = fresh();
    let writer = Writer::start(&f.path, Duration::from_mins(1), CLOCK).unwrap();
    for n in 0..5 {
        writer
            .push(Batch {
                rows: vec![(f.point, reading(n, 1.0))],
                events: vec![event(n, probe("P-1"))],
                ..Batch::default()
            })
            .unwrap();
    }
    let end = writer.stop();
    assert_eq!((end.committed, end.last_seq, end.n_waiting), (5, 5, 0));
    assert_eq!(Reader::open(&f.path).unwrap().events(0).unwrap().len(), 5);
}

#[test]
fn while_a_neighbour_holds_the_lock_readings_wait_and_then_all_land() {
    let f = fresh();
    let neighbour = Connection::open(&f.path).unwrap();
    neighbour.execute_batch("BEGIN IMMEDIATE").unwrap();
    let writer = Writer::start(&f.path, Duration::from_millis(20), CLOCK).unwrap();
    let mut last = 0;
    for n in 0..20 {
        last = writer
            .push(Batch {
                rows: vec![(f.point, reading(n, 1.0))],
                events: vec![],
                ..Batch::default()
            })
            .unwrap();
    }
    let status = wait_until(&mut writer.status(), |s| s.trouble.is_some());
    assert_eq!(status.committed, 0);
    assert!(
        status
            .trouble
            .unwrap()
            .error
            .contains("locked by another process")
    );
    neighbour.execute_batch("ROLLBACK").unwrap();
    let status = wait_until(&mut writer.status(), |s| s.committed == last);
    assert_eq!(status.trouble, None);
    assert_eq!(all(&f.path, f.point).len(), 20);
}
