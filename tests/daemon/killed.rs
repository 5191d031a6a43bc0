//! Killed under load, the daemon loses nothing that was committed.

use crate::harness::{PATIENCE, Ponds, ok, rows, until};
use rustix::process::Signal;

#[test]
fn what_was_committed_before_kill_9_is_there_after_the_restart() {
    let ponds = Ponds::new().with_probes();
    let mut seen = Vec::new();
    for round in 0..4 {
        let mut daemon = ponds.run();
        let more =
            || Some(rows(&ponds.ledger(), "POND-A")).filter(|now| now.len() > seen.len() + 1);
        let (now, _) = until("new rows", PATIENCE, more);
        daemon.signal(Signal::KILL);
        daemon.0.wait().unwrap();
        let after = rows(&ponds.ledger(), "POND-A");
        assert_eq!(
            after[..now.len()],
            now[..],
            "round {round}: every committed row, unchanged"
        );
        seen = after;
    }
    let sequence: Vec<i64> = seen.iter().map(|(seq, _)| *seq).collect();
    assert!(
        sequence.windows(2).all(|pair| pair[0] < pair[1]),
        "{sequence:?}"
    );
    ok(&ponds.says(&["audit"]));
}
