//! A whole bus against an independent Modbus implementation: pymodbus as the RTU server of eight units, `tests/lines/modbus_server.py`.
//!
//! The wire between is ours: it keeps what is meant for unit 8 from the server (which would answer for an absent unit too), and puts
//! noise between the frames around unit 7.

use crate::harness::{MS, Running, line, meter, numbers, run, site};
use halfcell::config::site::{Protocol, Source};
use halfcell::daemon::clock::instant;
use halfcell::daemon::line::FromLine;
use halfcell::meters::counters::Counters;
use rustix::event::{PollFd, PollFlags, Timespec, poll};
use rustix::fs::{Mode, OFlags};
use rustix::pty::{OpenptFlags, grantpt, openpt, ptsname, unlockpt};
use rustix::termios::{OptionalActions, tcgetattr, tcsetattr};
use std::io::{BufRead as _, BufReader, Write as _};
use std::os::fd::OwnedFd;
use std::path::{Path, PathBuf};
use std::process::{Child, Command, Stdio};
use std::sync::Arc;
use std::sync::atomic::{AtomicBool, Ordering};
use std::thread::JoinHandle;
use std::time::Duration;

const EVERY: Duration = Duration::from_millis(100);
const POLLS: usize = 200;

/// The Python to ask: `HALFCELL_PYTHON`, else `python3`.
fn python() -> Command {
    Command::new(std::env::var_os("HALFCELL_PYTHON").unwrap_or_else(|| "python3".into()))
}

/// A pseudo-terminal: its master, its path, and its other end held open and raw.
fn terminal() -> (OwnedFd, PathBuf, OwnedFd) {
    let master = openpt(OpenptFlags::RDWR | OpenptFlags::NOCTTY).unwrap();
    grantpt(&master).unwrap();
    unlockpt(&master).unwrap();
    let path = PathBuf::from(ptsname(&master, Vec::new()).unwrap().into_string().unwrap());
    let slave = rustix::fs::open(&path, OFlags::RDWR | OFlags::NOCTTY, Mode::empty()).unwrap();
    let mut modes = tcgetattr(&slave).unwrap();
    modes.make_raw();
    tcsetattr(&slave, OptionalActions::Now, &modes).unwrap();
    (master, path, slave)
}

/// The wire between our line and the server.
struct Wire {
    ours: PathBuf,
    theirs: PathBuf,
    stop: Arc<AtomicBool>,
    thread: Option<JoinHandle<usize>>,
}

impl Wire {
    fn start() -> Self {
        let ((our_end, ours, our_slave), (their_end, theirs, their_slave)) =
            (terminal(), terminal());
        let stop = Arc::new(AtomicBool::new(false));
        let stopped = Arc::clone(&stop);
        let thread = std::thread::spawn(move || {
            let (mut n_noise, mut seed) = (0, 1_u32);
            let mut unit = 0;
            while !stopped.load(Ordering::Relaxed) {
                let wait = Timespec {
                    tv_sec: 0,
                    tv_nsec: 5_000_000,
                };
                let mut ends = [
                    PollFd::new(&our_end, PollFlags::IN),
                    PollFd::new(&their_end, PollFlags::IN),
                ];
                poll(&mut ends, Some(&wait)).unwrap();
                let ready = ends
                    .each_ref()
                    .map(|end| end.revents().contains(PollFlags::IN));
                let mut bytes = [0; 512];
                if ready[0] {
                    let n = rustix::io::read(&our_end, &mut bytes).unwrap();
                    unit = bytes[0];
                    if unit != 8 {
                        rustix::io::write(&their_end, &bytes[..n]).unwrap();
                    }
                }
                if ready[1] {
                    let n = rustix::io::read(&their_end, &mut bytes).unwrap();
                    rustix::io::write(&our_end, &bytes[..n]).unwrap();
                    if unit == 7 {
                        seed = seed.wrapping_mul(1_664_525).wrapping_add(1_013_904_223);
                        // The beginning of a right answer is the worst noise.
                        let worst = [1, 4, 4, 7, 0x84, 0xFF, 0x00];
                        let length = 1 + (seed >> 16) as usize % 40;
                        let noise: Vec<u8> = (0..length).map(|i| worst[(i + length) % 7]).collect();
                        rustix::io::write(&our_end, &noise).unwrap();
                        n_noise += 1;
                    }
                }
            }
            drop((our_slave, their_slave));
            n_noise
        });
        Self {
            ours,
            theirs,
            stop,
            thread: Some(thread),
        }
    }

    /// How often there was noise.
    fn end(&mut self) -> usize {
        self.stop.store(true, Ordering::Relaxed);
        self.thread.take().unwrap().join().unwrap()
    }
}

/// The server, ended with its test.
struct Server(Child);

impl Server {
    fn start(device: &Path) -> Self {
        let script = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/lines/modbus_server.py");
        let mut child = python()
            .arg(script)
            .arg(device)
            .stdin(Stdio::piped())
            .stdout(Stdio::piped())
            .spawn()
            .unwrap();
        let mut told = String::new();
        let mut lines = BufReader::new(child.stdout.take().unwrap());
        lines.read_line(&mut told).unwrap();
        assert_eq!(told, "ready\n", "the server did not start");
        Self(child)
    }
}

impl Drop for Server {
    fn drop(&mut self) {
        drop(self.0.kill());
        drop(self.0.wait());
    }
}

fn counters(told: &[FromLine]) -> Counters {
    let last = told.iter().rev().find_map(|m| match m {
        FromLine::Counters { counters, .. } => Some((**counters).clone()),
        _ => None,
    });
    last.unwrap()
}

/// `listen --modbus` finds every unit that answers and shows what it reads.
fn found_by_listening(device: &Path) {
    let said = Command::new(env!("CARGO_BIN_EXE_halfcell"))
        .arg("listen")
        .arg(device)
        .args(["--modbus", "--units", "1-8", "--baud", "115200", "--json"])
        .output()
        .unwrap();
    let said: serde_json::Value = serde_json::from_slice(&said.stdout).unwrap();
    let units = said["units"].as_array().unwrap();
    let found: Vec<u64> = units.iter().map(|u| u["unit"].as_u64().unwrap()).collect();
    assert_eq!(found, [1, 2, 3, 4, 5, 6, 7], "{said:#}");
    assert_eq!(units[5]["exception"], 2, "illegal data address");
    assert_eq!(units[2]["registers"][0]["i16"], 303);
    let block = said["block"].as_str().unwrap();
    let site = format!(
        "[site]\nname = \"found\"\ntimezone = \"UTC\"\nledger = \"/tmp/found.db\"\n\n{block}\n[[point]]\ntag = \"P\"\n\
         quantity = \"orp\"\nsignal = \"line-{}-1.input_0\"\ntemperature = {{ fixed = 25.0 }}\nevery = \"1s\"\ntolerance = 10.0\n",
        device.file_name().unwrap().display()
    );
    let loaded = halfcell::config::load(&site);
    assert!(loaded.is_ok(), "{site}\n{loaded:#?}");
}

#[test]
fn five_healthy_units_beside_a_dead_a_refusing_and_a_noisy_one_lose_no_poll() {
    let can_ask = python()
        .args(["-c", "import pymodbus, serial"])
        .output()
        .is_ok_and(|o| o.status.success());
    if !can_ask {
        assert!(
            std::env::var_os("CI").is_none(),
            "CI must run the bus against the independent server: HALFCELL_PYTHON names no Python that has pymodbus and pyserial"
        );
        let warning = "NOT CHECKED against an independent Modbus server: name a Python with pymodbus and pyserial in HALFCELL_PYTHON";
        // Past the harness, which keeps what a passing test prints.
        writeln!(std::io::stderr(), "{warning}").unwrap();
        return;
    }
    run(async {
        let mut wire = Wire::start();
        let _server = Server::start(&wire.theirs);
        found_by_listening(&wire.ours);
        let source = |unit| Source::Modbus {
            unit,
            every: EVERY,
            timeout: 50 * MS,
        };
        let meters = (1..=8_u8)
            .map(|unit| meter(&format!("unit-{unit}"), 0, source(unit)))
            .collect();
        let site = site(vec![line(&wire.ours, Protocol::ModbusRtu)], meters);
        let begun = instant();
        let mut running = Running::start(&site, 0);
        running
            .until("the polls of the first unit", EVERY * 2 * 200, |told| {
                numbers(told, 0).len() >= POLLS
            })
            .await;
        let took = instant() - begun;
        let told = running.end().await;
        let n_noise = wire.end();
        let counters = counters(&told);
        for unit in 1..=7_u8 {
            let said = numbers(&told, usize::from(unit) - 1);
            let mv = 0.1 * (100.0 * f64::from(unit) + 3.0);
            for figures in &said {
                assert!(
                    (figures[0] - mv).abs() < 1e-9 && (figures[1] - 25.0).abs() < 1e-9,
                    "unit {unit} was given {figures:?}"
                );
            }
        }
        let of = |units: std::ops::Range<usize>| {
            let meters = &counters.meters[units];
            let asked: u64 = meters.iter().map(|m| m.asked).sum();
            let samples: u64 = meters.iter().map(|m| m.samples).sum();
            (samples, asked)
        };
        let (samples, asked) = of(0..5);
        println!(
            "{took:.1?}: healthy {samples} of {asked} polls, refusing {:?}, noisy {:?} with noise {n_noise} times, dead {:?}",
            of(5..6),
            of(6..7),
            of(7..8)
        );
        // A question may be out when the line is stopped.
        assert!(samples * 1000 >= (asked - 1) * 999, "{samples} of {asked}");
        let ticks = 5 * (took.as_millis() / EVERY.as_millis());
        assert!(
            u128::from(samples) * 1000 >= (ticks - 10) * 999,
            "{samples} samples in {ticks} ticks of the healthy units"
        );
        assert_eq!((of(5..6).0, of(7..8).0), (0, 0), "no value from nothing");
        assert!(of(5..6).1 >= 3 && of(7..8).1 >= 3);
        assert!(n_noise > 100, "noise {n_noise} times");
    });
}
