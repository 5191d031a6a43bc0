//! The world fails under the writer: a full disk, a disk that goes away, an hour without a disk, a clock that steps.

use super::writer::{CLOCK, wait_until};
use super::{all, event, fresh, probe, reading};
use halfcell::electrode::history::{ProbeKind, Tag};
use halfcell::electrode::units::Timestamp;
use halfcell::ledger::event::Body;
use halfcell::ledger::{Batch, Clock, Ledger, Reader, Writer};
use rusqlite::Connection;
use std::path::Path;
use std::process::Command;
use std::sync::atomic::{AtomicI64, AtomicU64, Ordering};
use std::time::{Duration, Instant};

const WINDOW: Duration = Duration::from_millis(30);
/// Set, this names the small file system that a child test fills.
const SMALL_DISK: &str = "HALFCELL_TEST_SMALL_DISK";

fn batch(point: halfcell::ledger::PointId, from: i64, n: i64) -> Batch {
    Batch {
        rows: (from..from + n).map(|t| (point, reading(t, 1.0))).collect(),
        ..Batch::default()
    }
}

/// Runs a test of this binary in a mount namespace of its own, on a small file system of the kind given.
fn on_a_small_disk(mount: &str, test: &str) {
    let folder = tempfile::tempdir().unwrap();
    let script =
        format!("{mount} && {SMALL_DISK}=\"$1/disk\" exec \"$2\" --exact {test} --nocapture");
    // Root takes a mount namespace; anybody else a user namespace with it, where the system allows that.
    let root = rustix::process::geteuid().is_root();
    let output = Command::new("unshare")
        .args(if root { ["-m", "--"] } else { ["-rm", "--"] })
        .args(["sh", "-c", &script, "sh"])
        .arg(folder.path())
        .arg(std::env::current_exe().unwrap())
        .output()
        .unwrap();
    let (out, err) = (
        String::from_utf8_lossy(&output.stdout),
        String::from_utf8_lossy(&output.stderr),
    );
    assert!(
        output.status.success() && out.contains("1 passed"),
        "{out}\n{err}"
    );
}

const TMPFS: &str = "mkdir \"$1/disk\" && mount -t tmpfs -o size=4m tmpfs \"$1/disk\"";

#[test]
fn child_that_fills_a_small_disk() {
    let Some(folder) = std::env::var_os(SMALL_DISK) else {
        return;
    };
    let folder = Path::new(&folder);
    let path = folder.join("site.db");
    let point = Ledger::open(&path)
        .unwrap()
        .point(&Tag::from("POND-3"), ProbeKind::Ph)
        .unwrap();
    let writer = Writer::start(&path, WINDOW, CLOCK).unwrap();
    let ballast = folder.join("ballast");
    std::fs::write(&ballast, vec![1_u8; 2_500_000]).unwrap();
    let (mut sent, mut last) = (0, 0);
    while writer.status().borrow().trouble.is_none() {
        last = writer.push(batch(point, sent, 500)).unwrap();
        sent += 500;
        wait_until(&mut writer.status(), |s| {
            s.committed == last || s.trouble.is_some()
        });
    }
    let told = writer.status().borrow().trouble.clone().unwrap();
    assert!(told.error.contains("no room left"), "{told:?}");
    assert_eq!(told.remedy, "make room on the disk");
    for _ in 0..10 {
        last = writer.push(batch(point, sent, 500)).unwrap();
        sent += 500;
    }
    let committed = writer.status().borrow().last_seq;
    assert_eq!(
        i64::try_from(all(&path, point).len()).unwrap(),
        committed,
        "readers go on and see what was acknowledged"
    );
    std::fs::remove_file(&ballast).unwrap();
    let status = wait_until(&mut writer.status(), |s| s.committed == last);
    assert_eq!((status.last_seq, status.n_dropped), (sent, 0));
    writer.stop();
    assert_eq!(i64::try_from(all(&path, point).len()).unwrap(), sent);
    assert!(Reader::open(&path).unwrap().audit().unwrap().is_sound());
}

#[test]
fn a_full_disk_delays_readings_and_loses_none() {
    on_a_small_disk(TMPFS, "trouble::child_that_fills_a_small_disk");
}

#[test]
fn child_whose_disk_turns_read_only() {
    let Some(folder) = std::env::var_os(SMALL_DISK) else {
        return;
    };
    let folder = Path::new(&folder);
    let path = folder.join("site.db");
    let remount = |how: &str| {
        let done = Command::new("mount")
            .args(["-o", &format!("remount,{how}")])
            .arg(folder)
            .status()
            .unwrap();
        assert!(done.success(), "remount {how}");
    };
    let mut ledger = Ledger::open(&path).unwrap();
    let point = ledger.point(&Tag::from("POND-3"), ProbeKind::Ph).unwrap();
    ledger.append(&batch(point, 0, 10).rows, &[]).unwrap();
    drop(ledger);
    // Closed in order, the log is gone: only an immutable opening can read it now.
    remount("ro");
    assert_eq!(all(&path, point).len(), 10);
    let refused = Ledger::open(&path).unwrap_err().to_string();
    assert!(refused.contains("cannot be written"), "{refused}");
    remount("rw");
    let writer = Writer::start(&path, WINDOW, CLOCK).unwrap();
    let ticket = writer.push(batch(point, 10, 10)).unwrap();
    wait_until(&mut writer.status(), |s| s.committed == ticket);
    writer.stop();
    assert_eq!(all(&path, point).len(), 20);
}

#[test]
fn on_a_read_only_file_system_readers_read_and_writers_say_why_not() {
    on_a_small_disk(TMPFS, "trouble::child_whose_disk_turns_read_only");
}

#[test]
fn a_ledger_that_went_away_is_not_made_anew_and_is_taken_up_when_it_is_back() {
    let f = fresh();
    // A limit on the size of files makes every write an I/O error; a moved folder makes reopening one.
    let moved = f.folder.path().join("moved.db");
    let writer = Writer::start(&f.path, WINDOW, CLOCK).unwrap();
    let ticket = writer.push(batch(f.point, 0, 10)).unwrap();
    wait_until(&mut writer.status(), |s| s.committed == ticket);
    // A table that is gone is neither a lock nor a full disk: the writer takes a fresh connection each time.
    let db = Connection::open(&f.path).unwrap();
    db.execute_batch("PRAGMA wal_checkpoint(TRUNCATE); ALTER TABLE counter RENAME TO hidden")
        .unwrap();
    let last = writer.push(batch(f.point, 10, 10)).unwrap();
    wait_until(&mut writer.status(), |s| s.trouble.is_some());
    db.execute_batch("ALTER TABLE hidden RENAME TO counter; PRAGMA wal_checkpoint(TRUNCATE)")
        .unwrap();
    drop(db);
    let status = wait_until(&mut writer.status(), |s| s.committed == last);
    assert_eq!((status.last_seq, status.trouble), (20, None));
    writer.stop();
    std::fs::rename(&f.path, &moved).unwrap();
    assert!(Ledger::open_existing(&f.path).is_err());
    assert!(!f.path.exists(), "a missing ledger is not made anew");
}

static SECONDS: AtomicU64 = AtomicU64::new(0);
#[expect(
    clippy::disallowed_methods,
    reason = "the test stands in for the daemon, which holds the clock"
)]
fn shifted() -> Instant {
    Instant::now() + Duration::from_secs(SECONDS.load(Ordering::SeqCst))
}

#[test]
fn after_an_hour_without_a_disk_the_oldest_are_dropped_counted_and_told() {
    let f = fresh();
    let neighbour = Connection::open(&f.path).unwrap();
    neighbour.execute_batch("BEGIN IMMEDIATE").unwrap();
    let clock = Clock {
        instant: shifted,
        ..CLOCK
    };
    let writer = Writer::start(&f.path, WINDOW, clock).unwrap();
    writer
        .push(Batch {
            events: vec![event(3, probe("P-1"))],
            ..batch(f.point, 0, 10)
        })
        .unwrap();
    wait_until(&mut writer.status(), |s| s.trouble.is_some());
    SECONDS.store(3_700, Ordering::SeqCst);
    let last = writer.push(batch(f.point, 10, 5)).unwrap();
    wait_until(&mut writer.status(), |s| s.n_dropped == 10);
    neighbour.execute_batch("ROLLBACK").unwrap();
    wait_until(&mut writer.status(), |s| s.committed == last);
    writer.stop();
    assert_eq!(all(&f.path, f.point).len(), 5);
    let events = Reader::open(&f.path).unwrap().events(0).unwrap();
    let dropped = Body::ReadingsDropped {
        n: 10,
        from: Timestamp::from_ms(0),
        to: Timestamp::from_ms(9),
    };
    assert!(
        events.iter().any(|e| e.body == dropped),
        "the loss is on record: {events:?}"
    );
    assert!(
        events.iter().any(|e| matches!(e.body, Body::ProbeAdded(_))),
        "events are never dropped"
    );
}

static WALL: AtomicI64 = AtomicI64::new(0);

fn wall() -> Timestamp {
    Timestamp::from_ms(WALL.load(Ordering::SeqCst))
}

#[test]
fn the_writer_seals_at_start_up_after_the_hour_and_on_a_step_of_the_clock() {
    const HOUR_MS: i64 = 3_600_000;
    let mut f = fresh();
    f.ledger
        .append(
            &[(f.point, reading(0, 1.0)), (f.point, reading(HOUR_MS, 1.0))],
            &[],
        )
        .unwrap();
    WALL.store(HOUR_MS + 200_000, Ordering::SeqCst);
    let clock = Clock { now: wall, ..CLOCK };
    let writer = Writer::start(&f.path, WINDOW, clock).unwrap();
    let n_sealed = || -> i64 {
        Connection::open(&f.path)
            .unwrap()
            .query_row("SELECT coalesce(sum(n), 0) FROM sealed", [], |row| {
                row.get(0)
            })
            .unwrap()
    };
    let sealed = |n: i64| {
        // Each commit lets the writer look around once more.
        for t in 0..300 {
            if n_sealed() == n {
                return true;
            }
            let ticket = writer
                .push(Batch {
                    events: vec![event(t, probe("P-1"))],
                    ..Batch::default()
                })
                .unwrap();
            wait_until(&mut writer.status(), |s| s.committed == ticket);
        }
        false
    };
    assert!(sealed(1), "at start-up the hour before");
    WALL.store(2 * HOUR_MS + 121_000, Ordering::SeqCst);
    assert!(sealed(2), "two minutes after its end the next");
    let ticket = writer.push(batch(f.point, 2 * HOUR_MS + 1, 10)).unwrap();
    wait_until(&mut writer.status(), |s| s.committed == ticket);
    let back = HOUR_MS + 500_000;
    WALL.store(back, Ordering::SeqCst);
    let step = Body::ClockStep {
        before: Timestamp::from_ms(2 * HOUR_MS + 121_000),
        after: Timestamp::from_ms(back),
        seq: 0,
    };
    let ticket = writer
        .push(Batch {
            events: vec![event(back, step)],
            ..batch(f.point, back, 3)
        })
        .unwrap();
    wait_until(&mut writer.status(), |s| s.committed == ticket);
    assert!(
        sealed(12),
        "on the step what was before it, not what came after"
    );
    writer.stop();
    assert_eq!(all(&f.path, f.point).len(), 15);
    assert!(Reader::open(&f.path).unwrap().audit().unwrap().is_sound());
}

#[test]
fn a_reader_that_holds_a_snapshot_delays_nothing_and_sees_its_own_moment() {
    let mut f = fresh();
    f.ledger.append(&batch(f.point, 0, 10).rows, &[]).unwrap();
    let db = Connection::open(&f.path).unwrap();
    db.execute_batch("BEGIN").unwrap();
    let count = || -> i64 {
        db.query_row("SELECT count(*) FROM reading", [], |row| row.get(0))
            .unwrap()
    };
    assert_eq!(count(), 10);
    // An hour of one point at 1 Hz, with sealing and pruning.
    for window in 0..200 {
        let rows: Vec<_> = (window * 18..window * 18 + 18)
            .map(|second| (f.point, reading(1_000 * second, 1.0)))
            .collect();
        f.ledger.append(&rows, &[]).unwrap();
    }
    f.ledger.seal_all(super::NOW).unwrap();
    while f.ledger.prune_some(super::NOW).unwrap() {}
    assert_eq!(count(), 10);
    assert_eq!(all(&f.path, f.point).len(), 3_610);
    db.execute_batch("COMMIT").unwrap();
    assert_eq!(count(), 0, "all is sealed and pruned");
}
