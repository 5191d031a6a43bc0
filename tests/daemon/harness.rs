//! A site of two stream lines, its daemon, and the commands a technician types.

use halfcell::electrode::history::Tag;
use halfcell::electrode::units::Timestamp;
use halfcell::ledger::Reader;
use halfcell::ledger::event::Event;
use halfcell::simulation::electrode::Shown;
use halfcell::simulation::meter::SimulatedLine;
use halfcell::simulation::talk::Talk;
use halfcell::watch::reading::Reading;
use std::ops::ControlFlow;
use std::path::{Path, PathBuf};
use std::process::{Child, Command, Output, Stdio};
use std::time::{Duration, Instant};

pub(crate) const HALFCELL: &str = env!("CARGO_BIN_EXE_halfcell");

/// Two ponds, each on a line of its own that gives −23.4 mV at 18.2 °C every second.
pub(crate) struct Ponds {
    pub(crate) folder: tempfile::TempDir,
    pub(crate) lines: Vec<SimulatedLine>,
}

impl Ponds {
    pub(crate) fn new() -> Self {
        let folder = tempfile::tempdir().unwrap();
        let figures = |_, _| Shown {
            mv: -23.4,
            temp_c: 18.2,
        };
        let line = |name: &str| {
            SimulatedLine::start(
                &folder.path().join(name),
                Talk::Stream,
                Box::new(figures),
                halfcell::daemon::clock::now,
            )
            .unwrap()
        };
        let lines = vec![line("pond-a"), line("pond-b")];
        let ponds = Self { folder, lines };
        std::fs::write(ponds.config(), ponds.text()).unwrap();
        ponds
    }

    pub(crate) fn text(&self) -> String {
        let mut text = format!(
            "[site]\nname = \"Two Ponds\"\ntimezone = \"America/Halifax\"\nledger = \"{}\"\ncommit_window = \"250ms\"\n",
            self.ledger().display()
        );
        for pond in ["a", "b"] {
            let device = self.folder.path().join(format!("pond-{pond}"));
            let tag = pond.to_uppercase();
            let one = format!(
                r"
[[line]]
name = 'line-{pond}'
device = '{}'
protocol = 'stream'

[[meter]]
name = 'meter-{pond}'
line = 'line-{pond}'
pattern = '(?<mv>[-+]?\d+\.\d+)\s*mV\s+(?<temp_c>[-+]?\d+\.\d+)'

[[point]]
tag = 'POND-{tag}'
quantity = 'ph'
signal = 'meter-{pond}.mv'
temperature = 'meter-{pond}.temp_c'
every = '1s'
tolerance = 0.1
",
                device.display()
            );
            text += &one;
        }
        text
    }

    pub(crate) fn config(&self) -> PathBuf {
        self.folder.path().join("halfcell.toml")
    }

    pub(crate) fn ledger(&self) -> PathBuf {
        self.folder.path().join("ponds.db")
    }

    pub(crate) fn run(&self) -> Daemon {
        Daemon(
            self.command(&["run"])
                .stderr(Stdio::null())
                .spawn()
                .unwrap(),
        )
    }

    pub(crate) fn command(&self, words: &[&str]) -> Command {
        let mut command = Command::new(HALFCELL);
        command
            .args(words)
            .env("HALFCELL_CONFIG", self.config())
            .env_remove("NOTIFY_SOCKET");
        command
    }

    pub(crate) fn says(&self, words: &[&str]) -> Output {
        self.command(words).output().unwrap()
    }

    /// A probe placed in each pond, and the first one calibrated.
    pub(crate) fn with_probes(self) -> Self {
        for pond in ["A", "B"] {
            let (id, tag) = (format!("G-{pond}"), format!("POND-{pond}"));
            ok(&self.says(&["probe", "add", &id, "--kind", "ph"]));
            ok(&self.says(&["probe", "place", &id, "--point", &tag]));
        }
        self.calibrate(177.5);
        self
    }

    /// Calibrates the first pond's probe, with this many millivolts in phthalate.
    pub(crate) fn calibrate(&self, phthalate_mv: f64) {
        let phthalate = format!("phthalate,{phthalate_mv},25.0");
        ok(&self.says(&[
            "calibrate",
            "--probe",
            "G-A",
            "--by",
            "M. Oake",
            "--buffer",
            &phthalate,
            "--buffer",
            "phosphate,8.0,25.0",
        ]));
    }
}

#[track_caller]
pub(crate) fn ok(output: &Output) {
    assert!(output.status.success(), "{output:?}");
}

/// A daemon that is killed with its test.
pub(crate) struct Daemon(pub(crate) Child);

impl Daemon {
    pub(crate) fn signal(&self, signal: rustix::process::Signal) {
        let pid = rustix::process::Pid::from_child(&self.0);
        rustix::process::kill_process(pid, signal).unwrap();
    }

    /// Ends it in order.
    pub(crate) fn stop(mut self) {
        self.signal(rustix::process::Signal::TERM);
        assert!(self.0.wait().unwrap().success(), "it ends with code 0");
    }
}

impl Drop for Daemon {
    fn drop(&mut self) {
        drop(self.0.kill());
        drop(self.0.wait());
    }
}

/// All rows of a point in order of arrival.
pub(crate) fn rows(ledger: &Path, tag: &str) -> Vec<(i64, Reading)> {
    let Ok(reader) = Reader::open(ledger) else {
        return Vec::new();
    };
    let points = reader.points().unwrap();
    let Some((_, id)) = points
        .into_iter()
        .find(|(known, _)| *known == Tag::from(tag))
    else {
        return Vec::new();
    };
    let mut found = Vec::new();
    let all = (Timestamp::from_ms(0), Timestamp::from_ms(i64::MAX / 4));
    reader
        .readings(id, all.0, all.1, |seq, reading| {
            found.push((seq, reading));
            ControlFlow::Continue(())
        })
        .unwrap();
    found.sort_by_key(|(seq, _)| *seq);
    found
}

/// All events; none while the daemon is still making the ledger.
pub(crate) fn events(ledger: &Path) -> Vec<Event> {
    Reader::open(ledger)
        .and_then(|reader| reader.events(0))
        .unwrap_or_default()
}

/// How long after it was recorded the newest calibration made its first reading at `tag`, by the ledger's own times.
pub(crate) fn taken_up_after_ms(ledger: &Path, tag: &str) -> Option<i64> {
    let is_calibration =
        |e: &&Event| matches!(e.body, halfcell::ledger::event::Body::Calibration(_));
    let events = events(ledger);
    let calibration = events.iter().rev().find(is_calibration)?;
    let rows = rows(ledger, tag);
    let first = rows
        .iter()
        .find(|(_, r)| r.calibration == Some(calibration.id))?;
    Some(first.1.at.ms() - calibration.entered.ms())
}

/// Waits until `so` gives something, at most `limit`.
#[expect(
    clippy::disallowed_methods,
    reason = "waits for a state with a limit, looking every 20 ms"
)]
pub(crate) fn until<T>(
    what: &str,
    limit: Duration,
    mut so: impl FnMut() -> Option<T>,
) -> (T, Duration) {
    let began = Instant::now();
    loop {
        if let Some(found) = so() {
            return (found, began.elapsed());
        }
        assert!(began.elapsed() < limit, "waited {limit:?} for {what}");
        std::thread::sleep(Duration::from_millis(20));
    }
}

/// Long enough for a busy machine, short enough to be told.
pub(crate) const PATIENCE: Duration = Duration::from_secs(20);
