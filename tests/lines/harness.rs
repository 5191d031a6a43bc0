//! A peer behind a pseudo-terminal, and a running line whose messages are collected.

use halfcell::config::site::{
    Device, Framing, Layout, Line, Meter, Parity, Protocol, Register, Signal, Site, Source, Table,
    TextShape, WordOrder,
};
use halfcell::daemon::clock::instant;
use halfcell::daemon::line::{FromLine, run_line};
use halfcell::meters::sample::Figure;
use rustix::event::{PollFd, PollFlags, Timespec, poll};
use rustix::fs::{Mode, OFlags};
use rustix::pty::{OpenptFlags, grantpt, openpt, ptsname, unlockpt};
use rustix::termios::{OptionalActions, Termios, tcgetattr, tcsetattr};
use std::os::fd::OwnedFd;
use std::path::{Path, PathBuf};
use std::sync::Arc;
use std::sync::mpsc as std_mpsc;
use std::thread::JoinHandle;
use std::time::{Duration, Instant};
use tokio::sync::{mpsc, watch};
use tokio::task::JoinHandle as TaskHandle;

/// Bytes to be said so much later.
pub(crate) type Said = Vec<(Duration, Vec<u8>)>;

/// What sits at the other end of a line.
pub(crate) struct Peer {
    pub(crate) path: PathBuf,
    say: Option<std_mpsc::Sender<Vec<u8>>>,
    slave: Arc<OwnedFd>,
    thread: Option<JoinHandle<()>>,
}

impl Peer {
    /// Answers what it hears by `answer`, which gets all bytes heard since it last answered something.
    pub(crate) fn start(answer: impl FnMut(&[u8]) -> Said + Send + 'static) -> Self {
        let master = openpt(OpenptFlags::RDWR | OpenptFlags::NOCTTY).unwrap();
        grantpt(&master).unwrap();
        unlockpt(&master).unwrap();
        let path = PathBuf::from(ptsname(&master, Vec::new()).unwrap().into_string().unwrap());
        // Held open so that the master never sees a hang-up between two openings; raw so that nothing is echoed.
        let slave = rustix::fs::open(&path, OFlags::RDWR | OFlags::NOCTTY, Mode::empty()).unwrap();
        let mut modes = tcgetattr(&slave).unwrap();
        modes.make_raw();
        tcsetattr(&slave, OptionalActions::Now, &modes).unwrap();
        let (say, said) = std_mpsc::channel();
        let thread = std::thread::spawn(move || talk(&master, &said, answer));
        Self {
            path,
            say: Some(say),
            slave: Arc::new(slave),
            thread: Some(thread),
        }
    }

    /// One that never answers.
    pub(crate) fn mute() -> Self {
        Self::start(|_| Vec::new())
    }

    pub(crate) fn say(&self, bytes: impl Into<Vec<u8>>) {
        self.say.as_ref().unwrap().send(bytes.into()).unwrap();
    }

    /// Waits until so many bytes lie in the port, for a reader to come.
    pub(crate) fn said_all(&self, n_bytes: u64) {
        let limit = instant() + Duration::from_secs(5);
        while rustix::io::ioctl_fionread(&*self.slave).unwrap() < n_bytes {
            assert!(instant() < limit, "{n_bytes} bytes do not arrive");
            std::thread::yield_now();
        }
    }

    /// How the port was set by whoever opened it.
    pub(crate) fn modes(&self) -> Termios {
        tcgetattr(&*self.slave).unwrap()
    }
}

/// Pulls the plug: the master is closed.
impl Drop for Peer {
    fn drop(&mut self) {
        self.say = None;
        self.thread.take().unwrap().join().unwrap();
    }
}

fn talk(
    master: &OwnedFd,
    said: &std_mpsc::Receiver<Vec<u8>>,
    mut answer: impl FnMut(&[u8]) -> Said,
) {
    let (mut due, mut heard) = (Vec::<(Instant, Vec<u8>)>::new(), Vec::new());
    loop {
        loop {
            match said.try_recv() {
                Ok(bytes) => due.push((instant(), bytes)),
                Err(std_mpsc::TryRecvError::Empty) => break,
                Err(std_mpsc::TryRecvError::Disconnected) => return,
            }
        }
        due.sort_by_key(|(at, _)| *at);
        while due.first().is_some_and(|(at, _)| *at <= instant()) {
            let mut bytes = &due.remove(0).1[..];
            while !bytes.is_empty() {
                let n = rustix::io::write(master, bytes).unwrap();
                bytes = &bytes[n..];
            }
        }
        let wait = Timespec {
            tv_sec: 0,
            tv_nsec: 2_000_000,
        };
        let mut fds = [PollFd::new(master, PollFlags::IN)];
        if poll(&mut fds, Some(&wait)).unwrap() > 0 {
            let mut bytes = [0; 512];
            let n = rustix::io::read(master, &mut bytes).unwrap();
            heard.extend(&bytes[..n]);
            let answers = answer(&heard);
            if !answers.is_empty() {
                heard.clear();
                due.extend(
                    answers
                        .into_iter()
                        .map(|(after, bytes)| (instant() + after, bytes)),
                );
            }
        }
    }
}

/// One at a time: tests that keep the machine busy, and tests whose peer must answer within milliseconds.
pub(crate) fn alone() -> std::sync::MutexGuard<'static, ()> {
    static ALONE: std::sync::Mutex<()> = std::sync::Mutex::new(());
    ALONE
        .lock()
        .unwrap_or_else(std::sync::PoisonError::into_inner)
}

pub(crate) const MS: Duration = Duration::from_millis(1);

pub(crate) fn line(path: &Path, protocol: Protocol) -> Line {
    Line {
        name: format!("{protocol}-line"),
        device: Device::Path(path.to_path_buf()),
        framing: Framing {
            baud: 115_200,
            data_bits: 8,
            parity: Parity::None,
            stop_bits: 1,
        },
        protocol,
    }
}

pub(crate) fn text(pattern: &str) -> TextShape {
    TextShape {
        pattern: pattern.to_owned(),
        terminator: None,
        checksum: None,
        over_range: vec!["OL".to_owned()],
    }
}

pub(crate) fn meter(name: &str, line: usize, source: Source) -> Meter {
    let register = matches!(source, Source::Modbus { .. });
    let signal = |name: &str, address| Signal {
        name: name.to_owned(),
        scale: if register { 0.1 } else { 1.0 },
        register: register.then_some(Register {
            address,
            table: Table::Input,
            layout: Layout::I16,
            word_order: WordOrder::Big,
        }),
    };
    Meter {
        name: name.to_owned(),
        line,
        source,
        signals: vec![signal("mv", 0), signal("temp_c", 1)],
    }
}

pub(crate) fn site(lines: Vec<Line>, meters: Vec<Meter>) -> Arc<Site> {
    Arc::new(Site {
        name: "test".to_owned(),
        timezone: chrono_tz::UTC,
        ledger: PathBuf::new(),
        commit_window: Duration::from_secs(1),
        lines,
        meters,
        points: Vec::new(),
    })
}

/// A line's running task.
pub(crate) struct Running {
    pub(crate) told: Vec<FromLine>,
    from: mpsc::Receiver<FromLine>,
    stop: watch::Sender<bool>,
    task: TaskHandle<()>,
}

impl Running {
    pub(crate) fn start(site: &Arc<Site>, line: usize) -> Self {
        let (out, from) = mpsc::channel(64);
        let (stop, stopped) = watch::channel(false);
        let task = tokio::spawn(run_line(site.clone(), line, out, stopped));
        Self {
            told: Vec::new(),
            from,
            stop,
            task,
        }
    }

    /// Takes messages until the wanted state is there.
    pub(crate) async fn until(
        &mut self,
        what: &str,
        limit: Duration,
        mut reached: impl FnMut(&[FromLine]) -> bool,
    ) {
        let wait = async {
            while !reached(&self.told) {
                self.told.push(self.from.recv().await.unwrap());
            }
        };
        let within = tokio::time::timeout(limit, wait).await.is_ok();
        assert!(
            within,
            "not within {limit:?}: {what}; told so far: {:#?}",
            self.told
        );
    }

    /// Ends the task and gives everything it told.
    pub(crate) async fn end(mut self) -> Vec<FromLine> {
        self.stop.send(true).unwrap();
        while let Some(message) = self.from.recv().await {
            self.told.push(message);
        }
        self.task.await.unwrap();
        self.told
    }
}

/// The numbers of one meter's samples; over range is not a number and shows as infinity.
pub(crate) fn numbers(told: &[FromLine], of: usize) -> Vec<Vec<f64>> {
    let as_number = |figure: &Option<Figure>| match figure {
        Some(Figure::Number(number)) => *number,
        Some(Figure::OverRange) => f64::INFINITY,
        None => f64::NEG_INFINITY,
    };
    told.iter()
        .filter_map(|message| match message {
            FromLine::Sample { sample, .. } if sample.meter == of => {
                Some(sample.figures.iter().map(as_number).collect())
            }
            _ => None,
        })
        .collect()
}

pub(crate) fn run(test: impl Future<Output = ()>) {
    tokio::runtime::Builder::new_current_thread()
        .enable_all()
        .build()
        .unwrap()
        .block_on(test);
}
