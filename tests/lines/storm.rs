//! Sixty-four lines at ten lines a second, with junk, split lines and cables that fall out: the generator's ledger against ours, row by row.
//!
//! Ten seconds here; `HALFCELL_STORM_SECONDS=60` makes it a minute.

use crate::harness::{line, meter, numbers, run, site, text};
use halfcell::config::site::{Protocol, Site, Source};
use halfcell::daemon::clock::instant;
use halfcell::daemon::line::{FromLine, run_line};
use rustix::event::{Timespec, poll};
use rustix::fs::{Mode, OFlags};
use rustix::pty::{OpenptFlags, grantpt, openpt, ptsname, unlockpt};
use rustix::termios::{OptionalActions, tcgetattr, tcsetattr};
use rustix::time::{ClockId, clock_gettime};
use std::collections::BTreeMap;
use std::os::fd::OwnedFd;
use std::path::{Path, PathBuf};
use std::sync::Arc;
use std::sync::atomic::{AtomicBool, AtomicU32, Ordering};
use std::time::{Duration, Instant};
use tokio::sync::{mpsc, watch};

const LINES: usize = 64;
const PER_SECOND: u32 = 10;

/// One line of the generator.
struct Wire {
    path: PathBuf,
    ends: Option<(OwnedFd, OwnedFd)>,
    /// The rest of a split line.
    rest: Vec<u8>,
    replug_at: Instant,
    /// Whether the first end of a line since it was plugged in was said.
    begun: bool,
}

impl Wire {
    fn plug(&mut self) {
        let master = openpt(OpenptFlags::RDWR | OpenptFlags::NOCTTY).unwrap();
        grantpt(&master).unwrap();
        unlockpt(&master).unwrap();
        let pts = PathBuf::from(ptsname(&master, Vec::new()).unwrap().into_string().unwrap());
        let slave = rustix::fs::open(&pts, OFlags::RDWR | OFlags::NOCTTY, Mode::empty()).unwrap();
        let mut modes = tcgetattr(&slave).unwrap();
        modes.make_raw();
        tcsetattr(&slave, OptionalActions::Now, &modes).unwrap();
        rustix::io::ioctl_fionbio(&master, true).unwrap();
        let new = self.path.with_extension("new");
        std::os::unix::fs::symlink(&pts, &new).unwrap();
        std::fs::rename(&new, &self.path).unwrap();
        (self.ends, self.begun) = (Some((master, slave)), false);
    }

    fn say(&self, bytes: &[u8]) {
        let (master, _) = self.ends.as_ref().unwrap();
        assert_eq!(rustix::io::write(master, bytes).unwrap(), bytes.len());
    }

    /// Says what gives no sample.
    fn spoil(&self, kind: u64, dice: &mut Dice) {
        match kind {
            1..=3 => self.say(&[b'x'; 600]),
            4..=6 => {
                let junk: Vec<u8> = (0..40).map(|_| dice.below(256).to_le_bytes()[0]).collect();
                self.say(&junk);
                self.say(b"\r\n");
            }
            7..=9 => self.say(b"-1\x000.5 mV 20.0 C\r\n"),
            _ => self.say(b"-1.5 mV ERR C\r\n"),
        }
    }
}

/// What our side shows the generator of one line.
#[derive(Default)]
struct Seen {
    /// Whether the port is open.
    open: AtomicBool,
    /// The number of the last sample.
    taken: AtomicU32,
}

/// Small, fast and the same on every run.
struct Dice(u64);

impl Dice {
    fn below(&mut self, n: u64) -> u64 {
        self.0 ^= self.0 << 13;
        self.0 ^= self.0 >> 7;
        self.0 ^= self.0 << 17;
        self.0 % n
    }
}

/// What the generator has said, and when the last byte was given to the system.
type Ledger = BTreeMap<(usize, u32), Instant>;

/// Talks for `seconds`; a cable falls out only when our side has taken everything said on it: what is in
/// it then is lost to anybody. The cables come back, still plugged in.
fn generate(folder: &Path, seconds: u64, seen: &[Seen]) -> (Ledger, usize, Vec<Wire>) {
    let mut dice = Dice(0x9E37_79B9_7F4A_7C15);
    let (mut ledger, mut numbers, mut n_unplugged) = (Ledger::new(), [0_u32; LINES], 0);
    let begun = instant();
    let mut wires: Vec<Wire> = (0..LINES)
        .map(|n| Wire {
            path: folder.join(format!("line-{n}")),
            ends: None,
            rest: Vec::new(),
            replug_at: begun,
            begun: false,
        })
        .collect();
    let turn = Duration::from_secs(1) / PER_SECOND / u32::try_from(LINES).unwrap();
    let mut next = begun;
    while instant() < begun + Duration::from_secs(seconds) {
        for (n, wire) in wires.iter_mut().enumerate() {
            next += turn;
            let wait = next.saturating_duration_since(instant());
            let span = Timespec {
                tv_sec: 0,
                tv_nsec: i64::from(wait.subsec_nanos()),
            };
            if !wait.is_zero() {
                // The generator's beat: nothing is waited for.
                poll(&mut [], Some(&span)).unwrap();
            }
            if wire.ends.is_none() {
                if instant() >= wire.replug_at {
                    wire.plug();
                }
                continue;
            }
            if !seen[n].open.load(Ordering::Acquire) {
                continue;
            }
            if !wire.begun {
                // What is said in the first moment may have begun before: an end of a line makes it certain.
                wire.say(b"\r\n");
                wire.begun = true;
                continue;
            }
            if !wire.rest.is_empty() {
                let rest = std::mem::take(&mut wire.rest);
                wire.say(&rest);
                ledger.insert((n, numbers[n]), instant());
                continue;
            }
            match dice.below(100) {
                0 if seen[n].taken.load(Ordering::Acquire) == numbers[n] => {
                    seen[n].open.store(false, Ordering::Release);
                    std::fs::remove_file(&wire.path).unwrap();
                    wire.ends = None;
                    wire.replug_at = instant() + Duration::from_millis(dice.below(1000));
                    n_unplugged += 1;
                }
                kind @ 1..=12 => wire.spoil(kind, &mut dice),
                kind => {
                    numbers[n] += 1;
                    let said = format!("{}.5 mV {n}.0 C\r\n", numbers[n]);
                    // An unended piece of junk before it would swallow it.
                    wire.say(b"\r\n");
                    if kind < 40 {
                        let cut = 1 + usize::try_from(dice.below(said.len() as u64 - 1)).unwrap();
                        wire.say(&said.as_bytes()[..cut]);
                        wire.rest = said.as_bytes()[cut..].to_vec();
                    } else {
                        wire.say(said.as_bytes());
                        ledger.insert((n, numbers[n]), instant());
                    }
                }
            }
        }
    }
    for (n, wire) in wires.iter().enumerate().filter(|(_, w)| !w.rest.is_empty()) {
        wire.say(&wire.rest);
        ledger.insert((n, numbers[n]), instant());
    }
    (ledger, n_unplugged, wires)
}

fn resident_kb() -> u64 {
    let status = std::fs::read_to_string("/proc/self/status").unwrap();
    let line = status.lines().find(|l| l.starts_with("VmRSS:")).unwrap();
    line.split_whitespace().nth(1).unwrap().parse().unwrap()
}

fn thread_cpu() -> Duration {
    let spent = clock_gettime(ClockId::ThreadCPUTime);
    Duration::new(
        spent.tv_sec.unsigned_abs(),
        u32::try_from(spent.tv_nsec).unwrap(),
    )
}

/// A stream line and its meter for each of the generator's.
fn site_below(folder: &Path) -> Arc<Site> {
    let path = |n| folder.join(format!("line-{n}"));
    let lines = (0..LINES).map(|n| line(&path(n), Protocol::Stream));
    let source = || Source::Stream {
        text: text(r"^(?<mv>\d+\.\d+) mV (?<temp_c>\d+\.\d+) C$"),
    };
    let meters = (0..LINES).map(|n| meter(&format!("m{n}"), n, source()));
    site(lines.collect(), meters.collect())
}

#[test]
fn a_storm_on_sixty_four_lines_loses_no_line_and_invents_none() {
    let seconds = std::env::var("HALFCELL_STORM_SECONDS");
    let seconds = seconds.map_or(10, |text| text.parse().unwrap());
    let folder = tempfile::tempdir().unwrap();
    let site = site_below(folder.path());
    run(async {
        let seen: Arc<Vec<Seen>> = Arc::new((0..LINES).map(|_| Seen::default()).collect());
        let (stop, stopped) = watch::channel(false);
        let (out, mut from) = mpsc::channel(4_096);
        let rss_before = resident_kb();
        for n in 0..LINES {
            tokio::spawn(run_line(Arc::clone(&site), n, out.clone(), stopped.clone()));
        }
        drop(out);
        let (to, below) = (Arc::clone(&seen), folder.path().to_path_buf());
        let (cpu, began) = (thread_cpu(), instant());
        let mut generator = tokio::task::spawn_blocking(move || generate(&below, seconds, &to));
        let (mut got, mut ended) = (Vec::new(), None);
        let (mut lost, mut back) = (0, 0);
        while ended.is_none() {
            tokio::select! {
                message = from.recv() => take(message.unwrap(), &seen, &mut got, (&mut lost, &mut back)),
                done = &mut generator => ended = Some(done.unwrap()),
            }
        }
        let (said, n_unplugged, wires) = ended.unwrap();
        let last = async {
            while got.len() < said.len() {
                let message = from.recv().await.unwrap();
                take(message, &seen, &mut got, (&mut lost, &mut back));
            }
        };
        // Whether the last lines came is seen below.
        drop(tokio::time::timeout(Duration::from_secs(5), last).await);
        drop(wires);
        let (spent, took) = (thread_cpu().saturating_sub(cpu), instant() - began);
        let rss = resident_kb();
        stop.send(true).unwrap();
        while let Some(message) = from.recv().await {
            take(message, &seen, &mut got, (&mut lost, &mut back));
        }
        let mut late: Vec<f64> = got
            .iter()
            .filter_map(|(row, at)| Some((*at - *said.get(row)?).as_secs_f64() * 1e3))
            .collect();
        late.sort_by(f64::total_cmp);
        println!(
            "{LINES} lines, {took:.1?}: {} lines said, {} samples, {n_unplugged} cables out, {lost} times lost, {back} back; \
             CPU {:.2} % of one core, memory {rss_before} kB before and {rss} kB at the end (whole test program); \
             from the wire to the sample: median {:.2} ms, 99 % within {:.2} ms, longest {:.2} ms",
            said.len(),
            got.len(),
            100.0 * spent.as_secs_f64() / took.as_secs_f64(),
            late[late.len() / 2],
            late[late.len() * 99 / 100],
            late[late.len() - 1]
        );
        same_rows(&said, &got);
        assert!(said.len() > 300 * usize::try_from(seconds).unwrap() && n_unplugged > 0);
        // The tail is the machine's, which builds other things beside this; it is printed above.
        let median = late[late.len() / 2];
        assert!(median < 50.0, "half of the samples within {median} ms");
    });
}

/// The generator's ledger against what was taken: nothing missing, nothing invented, nothing twice, in order.
fn same_rows(said: &Ledger, got: &[((usize, u32), Instant)]) {
    let mut ours: Vec<(usize, u32)> = got.iter().map(|(row, _)| *row).collect();
    for n in 0..LINES {
        let of_line = ours.iter().filter(|(line, _)| *line == n);
        assert!(of_line.is_sorted(), "line {n} out of order");
    }
    ours.sort_unstable();
    let missing: Vec<_> = said
        .keys()
        .filter(|row| ours.binary_search(row).is_err())
        .collect();
    let invented: Vec<_> = ours.iter().filter(|row| !said.contains_key(row)).collect();
    assert!(
        missing.is_empty() && invented.is_empty(),
        "missing {missing:?}, invented {invented:?}"
    );
    assert_eq!(ours.len(), said.len(), "some came twice");
}

/// Notes a sample's row, and which ports are open.
fn take(
    message: FromLine,
    seen: &[Seen],
    got: &mut Vec<((usize, u32), Instant)>,
    (lost, back): (&mut usize, &mut usize),
) {
    match message {
        FromLine::Sample {
            ref sample,
            instant,
            ..
        } => {
            let meter = sample.meter;
            let figures = numbers(std::slice::from_ref(&message), meter).concat();
            let line = f64::from(u32::try_from(meter).unwrap());
            let whole = figures[0] - 0.5;
            let right = (figures[1] - line).abs() < 1e-9 && whole.fract().abs() < 1e-9;
            assert!(right, "{message:?}");
            #[expect(
                clippy::cast_possible_truncation,
                clippy::cast_sign_loss,
                reason = "a small whole number"
            )]
            let n = whole as u32;
            seen[meter].taken.store(n, Ordering::Release);
            got.push(((meter, n), instant));
        }
        // The first counts of a line come when its port opens.
        FromLine::Counters { line, counters } => {
            if counters.bytes == 0 && counters.reopenings == 0 && counters.lost.is_none() {
                seen[line].open.store(true, Ordering::Release);
            }
        }
        FromLine::Lost { .. } => *lost += 1,
        FromLine::Back { line, .. } => {
            *back += 1;
            seen[line].open.store(true, Ordering::Release);
        }
        FromLine::MeterSilent { .. } | FromLine::MeterBack { .. } => {}
    }
}
