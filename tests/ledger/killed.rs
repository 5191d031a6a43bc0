//! A process killed in the middle of its work loses nothing it had acknowledged.

use super::writer::CLOCK;
use super::{all, reading};
use halfcell::electrode::history::{ProbeKind, Tag};
use halfcell::ledger::{Batch, Ledger, Reader, Writer};
use std::io::{BufRead, BufReader, Write};
use std::path::Path;
use std::process::{Command, Stdio};
use std::time::Duration;

const LEDGER: &str = "HALFCELL_TEST_KILLED_LEDGER";
const COMMITS: &str = "HALFCELL_TEST_KILLED_COMMITS";

/// The child's life; without its variable it is no child.
#[test]
fn child_that_writes_until_it_is_killed() {
    let Some(path) = std::env::var_os(LEDGER) else {
        return;
    };
    let n_commits: u64 = std::env::var(COMMITS).map_or(u64::MAX, |n| n.parse().unwrap());
    let path = Path::new(&path);
    let point = Ledger::open(path)
        .unwrap()
        .point(&Tag::from("POND-3"), ProbeKind::Ph)
        .unwrap();
    let writer = Writer::start(path, Duration::from_millis(1), CLOCK).unwrap();
    let mut status = writer.status();
    let runtime = tokio::runtime::Builder::new_current_thread()
        .build()
        .unwrap();
    for n in 0..n_commits {
        let rows = (0..8).map(|i| (point, reading(i, 1.0))).collect();
        let ticket = writer
            .push(Batch {
                rows,
                events: vec![],
                ..Batch::default()
            })
            .unwrap();
        if n % 4 == 3 || n + 1 == n_commits {
            let last_seq = runtime
                .block_on(status.wait_for(|s| s.committed >= ticket))
                .unwrap()
                .last_seq;
            writeln!(std::io::stdout(), "acknowledged {last_seq}").unwrap();
        }
    }
}

fn child(mut command: Command, path: &Path) -> Command {
    command.args([
        "--exact",
        "killed::child_that_writes_until_it_is_killed",
        "--nocapture",
    ]);
    command
        .env(LEDGER, path)
        .stdout(Stdio::piped())
        .stderr(Stdio::null());
    command
}

fn acknowledged(line: &str) -> Option<i64> {
    // Only a whole line counts: the last may be cut off.
    line.strip_suffix('\n')?
        .rsplit_once("acknowledged ")?
        .1
        .parse()
        .ok()
}

#[test]
fn every_acknowledged_reading_is_there_after_kill_9() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("site.db");
    let mut last = 0;
    for round in 1..=10 {
        let mut process = child(Command::new(std::env::current_exe().unwrap()), &path)
            .spawn()
            .unwrap();
        let mut output = BufReader::new(process.stdout.take().unwrap());
        let mut n_lines = 0;
        let mut line = String::new();
        while output.read_line(&mut line).unwrap() > 0 {
            if let Some(seq) = acknowledged(&line) {
                last = last.max(seq);
                n_lines += 1;
                if n_lines == round * 3 {
                    process.kill().unwrap();
                }
            }
            line.clear();
        }
        process.wait().unwrap();
        let reader = Reader::open(&path).unwrap();
        assert!(reader.audit().unwrap().is_sound());
        let point = reader.points().unwrap()[0].1;
        let mut seqs: Vec<_> = all(&path, point).iter().map(|(seq, _)| *seq).collect();
        seqs.sort_unstable();
        assert!(
            n_lines >= round * 3,
            "the child ended by itself after {n_lines} lines"
        );
        assert!(
            seqs.iter()
                .copied()
                .eq(1..=i64::try_from(seqs.len()).unwrap()),
            "round {round}: numbers are missing or given twice"
        );
        assert!(
            seqs.last() >= Some(&last),
            "round {round}: {last} was acknowledged, {:?} is there",
            seqs.last()
        );
    }
}

#[test]
fn a_commit_is_synced_with_fdatasync() {
    let flags = option_env!("LIBSQLITE3_FLAGS").unwrap_or_default();
    assert!(flags.contains("HAVE_FDATASYNC=1"), "built with `{flags}`");
    let folder = tempfile::tempdir().unwrap();
    let trace = folder.path().join("trace");
    let mut command = Command::new("strace");
    command
        .args(["-f", "-e", "trace=fsync,fdatasync", "-o"])
        .arg(&trace)
        .arg(std::env::current_exe().unwrap());
    let mut command = child(command, &folder.path().join("site.db"));
    // Without the tracer the flag above is all that can be said.
    let Ok(process) = command.env(COMMITS, "40").spawn() else {
        return;
    };
    assert!(process.wait_with_output().unwrap().status.success());
    let trace = std::fs::read_to_string(trace).unwrap();
    let n_data = trace.matches("fdatasync(").count();
    assert!(
        n_data >= 10,
        "{n_data} fdatasync calls for at least 10 commits"
    );
}
