//! The daemon as a service: ready, reload, one at a time, an orderly end.

use crate::harness::{PATIENCE, Ponds, events, rows, until};
use halfcell::ledger::event::Body;
use rustix::process::Signal;
use std::os::unix::net::UnixDatagram;
use std::process::Stdio;

#[test]
fn systemd_hears_that_it_is_ready_and_that_it_lives() {
    let ponds = Ponds::new();
    let socket = ponds.folder.path().join("notify");
    let heard = UnixDatagram::bind(&socket).unwrap();
    heard.set_read_timeout(Some(PATIENCE)).unwrap();
    let child = ponds
        .command(&["run"])
        .env("NOTIFY_SOCKET", &socket)
        .env("WATCHDOG_USEC", "300000")
        .stderr(Stdio::null())
        .spawn()
        .unwrap();
    let daemon = crate::harness::Daemon(child);
    let mut wanted = vec!["READY=1", "STATUS=2 points on 2 lines", "WATCHDOG=1"];
    let mut buffer = [0; 4_096];
    while !wanted.is_empty() {
        let n = heard.recv(&mut buffer).unwrap();
        let text = String::from_utf8_lossy(&buffer[..n]).into_owned();
        wanted.retain(|word| !text.contains(word));
    }
    daemon.stop();
}

#[test]
fn it_stops_in_order_and_says_so_in_the_ledger() {
    let ponds = Ponds::new().with_probes();
    let daemon = ponds.run();
    until("a row", PATIENCE, || rows(&ponds.ledger(), "POND-A").pop());
    daemon.stop();
    let last = events(&ponds.ledger()).pop().unwrap();
    assert_eq!(
        last.body,
        Body::DaemonStopped {
            why: "SIGTERM".to_owned()
        }
    );
}

#[test]
fn a_second_daemon_on_the_same_ledger_is_refused() {
    let ponds = Ponds::new();
    let _first = ponds.run();
    until("the first to be up", PATIENCE, || {
        ponds
            .ledger()
            .exists()
            .then(|| events(&ponds.ledger()).pop())
            .flatten()
    });
    let second = ponds.says(&["run"]);
    assert_eq!(second.status.code(), Some(3));
    let told = String::from_utf8_lossy(&second.stderr).into_owned();
    assert!(
        told.contains("another halfcell daemon writes ledger"),
        "{told}"
    );
    assert!(
        told.contains("do:    stop the other daemon first"),
        "{told}"
    );
}

#[test]
fn a_changed_configuration_is_taken_up_and_a_wrong_one_is_not() {
    let ponds = Ponds::new();
    let daemon = ponds.run();
    until("readings", PATIENCE, || {
        rows(&ponds.ledger(), "POND-A").pop()
    });
    let changes = || {
        events(&ponds.ledger())
            .iter()
            .filter(|e| matches!(e.body, Body::ConfigChanged { .. }))
            .count()
    };

    std::fs::write(
        ponds.config(),
        ponds.text().replace("tolerance = 0.1", "tolerance = -1.0"),
    )
    .unwrap();
    daemon.signal(Signal::HUP);
    std::fs::write(
        ponds.config(),
        ponds.text().replace("tag = 'POND-B'", "tag = 'POND-C'"),
    )
    .unwrap();
    daemon.signal(Signal::HUP);
    until("the change", PATIENCE, || (changes() > 0).then_some(()));
    until("the new point to be logged", PATIENCE, || {
        rows(&ponds.ledger(), "POND-C").pop()
    });
    daemon.stop();
}

#[test]
fn a_wrong_configuration_stops_the_start_with_every_mistake() {
    let ponds = Ponds::new();
    let wrong = ponds.text().replace("tolerance = 0.1", "tolerence = 0.1");
    std::fs::write(ponds.config(), wrong).unwrap();
    let refused = ponds.says(&["run"]);
    assert_eq!(refused.status.code(), Some(2));
    let told = String::from_utf8_lossy(&refused.stderr).into_owned();
    assert!(told.matches("tolerence").count() >= 2, "{told}");
    assert!(!ponds.ledger().exists(), "nothing was made");
}
