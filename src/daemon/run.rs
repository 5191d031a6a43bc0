//! # Running: start, serve, reload, stop
//!
//! One thread runs every line and the hub; the writer and the book have threads of their own.

use crate::config::site::Site;
use crate::daemon::book::BookWatch;
use crate::daemon::clock::{self, StepWatch};
use crate::daemon::hub::Hub;
use crate::daemon::line::{FromLine, run_line};
use crate::ledger::event::Body;
use crate::ledger::{Clock, Ledger, LedgerError, PointId, Writer, WriterStatus};
use crate::pipeline::Standing;
use sd_notify::NotifyState;
use std::fs::File;
use std::path::{Path, PathBuf};
use std::sync::Arc;
use std::time::{Duration, Instant};
use tokio::sync::{mpsc, watch};
use tokio::task::JoinHandle;

/// Room for what the lines say while the hub is at work; when it is full, lines wait and the system's port buffers hold the bytes.
const LINE_QUEUE: usize = 4_096;

/// How long a commit may hang before systemd is let know by silence: a failing card can stall a write for many seconds.
const WRITER_MAY_HANG: Duration = Duration::from_mins(1);

/// Why the daemon could not start or go on.
#[derive(Debug, thiserror::Error)]
pub enum DaemonError {
    /// The ledger cannot be used.
    #[error("the daemon cannot use its ledger")]
    Ledger {
        /// Why, with the file.
        source: Box<LedgerError>,
    },
    /// Another daemon writes this ledger.
    #[error("another halfcell daemon writes ledger `{}`", path.display())]
    AlreadyRunning {
        /// Its file.
        path: PathBuf,
    },
    /// The system refused something the daemon needs.
    #[error("the system refused {what}")]
    System {
        /// What.
        what: &'static str,
        /// Why.
        source: std::io::Error,
    },
}

/// What the daemon is asked to do while it runs.
#[derive(Debug)]
pub enum Order {
    /// Take up another configuration.
    Reload {
        /// The checked site.
        site: Arc<Site>,
        /// SHA-256 of its text.
        config_sha256: String,
    },
    /// End in order.
    Stop {
        /// Why, for the event.
        why: String,
    },
}

/// Everything a running daemon holds.
struct Daemon {
    site: Arc<Site>,
    hub: Hub,
    writer: Writer,
    standing: watch::Receiver<Arc<Standing>>,
    lines: Lines,
    from_lines: mpsc::Receiver<FromLine>,
    steps: StepWatch,
    /// Last ticket the writer gave.
    pushed: u64,
    written: watch::Receiver<WriterStatus>,
    last_status: WriterStatus,
    /// When the writer last showed that it lives.
    writer_seen: Instant,
}

/// Runs until told to stop.
///
/// # Errors
/// [`DaemonError`] when it cannot start; once it runs, a failing port or disk is an event and is tried again.
pub async fn run(
    site: Arc<Site>,
    config_sha256: String,
    mut orders: mpsc::Receiver<Order>,
) -> Result<(), DaemonError> {
    let path = site.ledger.clone();
    let ledger_error = |source| DaemonError::Ledger {
        source: Box::new(source),
    };
    let mut ledger = Ledger::open(&path).map_err(ledger_error)?;
    let _lock = lock(&path)?;
    let ids = point_ids(&mut ledger, &site).map_err(ledger_error)?;
    drop(ledger);
    let watched = BookWatch::start(path.clone()).map_err(ledger_error)?;
    let writer = Writer::start(
        &path,
        site.commit_window,
        Clock {
            now: clock::now,
            instant: clock::instant,
        },
    )
    .map_err(ledger_error)?;
    let now = clock::now();
    let standing = watched.standing();
    let hub = Hub::new(Arc::clone(&site), ids, Arc::clone(&standing.borrow()), now);
    let (to_hub, from_lines) = mpsc::channel(LINE_QUEUE);
    let lines = Lines::start(&site, &to_hub);
    let steps = StepWatch::new(now, clock::since_boot_ms());
    let written = writer.status();
    let mut daemon = Daemon {
        site,
        hub,
        writer,
        standing,
        lines,
        from_lines,
        steps,
        pushed: 0,
        written,
        last_status: WriterStatus::default(),
        writer_seen: clock::instant(),
    };
    let version = env!("CARGO_PKG_VERSION").to_owned();
    daemon.hub.event(
        now,
        Body::DaemonStarted {
            version,
            config_sha256,
        },
    );
    daemon.hand_over();
    notify(&[NotifyState::Ready]);
    tracing::info!(site = %daemon.site.name, n_lines = daemon.site.lines.len(), n_points = daemon.site.points.len(), "daemon started");
    let why = daemon.serve(&mut orders).await;
    notify(&[NotifyState::Stopping]);
    daemon.stop(why).await;
    Ok(())
}

impl Daemon {
    async fn serve(&mut self, orders: &mut mpsc::Receiver<Order>) -> String {
        let mut beat = tokio::time::interval(beat_every());
        loop {
            let now = clock::now();
            let until_due = self.hub.next_due(now).ms() - now.ms();
            // Never longer than a second, so that a clock step is noticed though nothing arrives.
            let wait = Duration::from_millis(u64::try_from(until_due).unwrap_or(0).clamp(1, 1_000));
            tokio::select! {
                biased;
                order = orders.recv() => match order {
                    Some(Order::Reload { site, config_sha256 }) => self.reload(site, config_sha256).await,
                    Some(Order::Stop { why }) => return why,
                    None => return "its caller is gone".to_owned(),
                },
                message = self.from_lines.recv() => if let Some(message) = message {
                    self.look_at_clock();
                    self.hub.take(message, clock::now());
                },
                Ok(()) = self.standing.changed() => {}
                _ = beat.tick() => self.tell_systemd(),
                () = tokio::time::sleep(wait) => {}
            }
            self.look_at_clock();
            while let Ok(message) = self.from_lines.try_recv() {
                self.hub.take(message, clock::now());
            }
            if self.standing.has_changed().unwrap_or(false) {
                self.standing.mark_unchanged();
            }
            let standing = Arc::clone(&self.standing.borrow());
            self.hub.set_standing(standing);
            self.hub.due(clock::now());
            self.hand_over();
        }
    }

    fn look_at_clock(&mut self) {
        if let Some(step) = self.steps.look(clock::now(), clock::since_boot_ms()) {
            tracing::warn!(
                before_ms = step.before.ms(),
                after_ms = step.after.ms(),
                "clock stepped"
            );
            self.hub.clock_stepped(step);
        }
    }

    fn hand_over(&mut self) {
        let Some(batch) = self.hub.take_batch() else {
            return;
        };
        match self.writer.push(batch) {
            Ok(ticket) => self.pushed = ticket,
            Err(error) => tracing::error!(cause = %crate::daemon::chain(&error), "batch not taken"),
        }
    }

    async fn reload(&mut self, site: Arc<Site>, config_sha256: String) {
        notify(&[NotifyState::Reloading]);
        if site.ledger != self.site.ledger {
            tracing::error!("ledger moved in the configuration; restart the daemon to follow it");
            notify(&[NotifyState::Ready]);
            return;
        }
        let ids = match Ledger::open(&site.ledger)
            .and_then(|mut ledger| point_ids(&mut ledger, &site))
        {
            Ok(ids) => ids,
            Err(error) => {
                tracing::error!(cause = %crate::daemon::chain(&error), "configuration not taken up");
                notify(&[NotifyState::Ready]);
                return;
            }
        };
        let same_lines = site.lines == self.site.lines && site.meters == self.site.meters;
        if !same_lines {
            self.lines.stop().await;
            while let Ok(message) = self.from_lines.try_recv() {
                self.hub.take(message, clock::now());
            }
        }
        let now = clock::now();
        self.hub.reload(Arc::clone(&site), ids, now);
        self.hub.event(now, Body::ConfigChanged { config_sha256 });
        if !same_lines {
            let (to_hub, from_lines) = mpsc::channel(LINE_QUEUE);
            self.lines = Lines::start(&site, &to_hub);
            self.from_lines = from_lines;
        }
        self.site = site;
        self.hand_over();
        tracing::info!("configuration taken up");
        notify(&[NotifyState::Ready]);
    }

    async fn stop(mut self, why: String) {
        self.lines.stop().await;
        while let Ok(message) = self.from_lines.try_recv() {
            self.hub.take(message, clock::now());
        }
        let now = clock::now();
        // What the last, unfinished intervals hold is kept too.
        let end = self
            .site
            .points
            .iter()
            .map(|p| p.every)
            .max()
            .unwrap_or_default();
        self.hub
            .due(now.plus_ms(i64::try_from(end.as_millis()).unwrap_or(0)));
        self.hub.event(now, Body::DaemonStopped { why });
        self.hand_over();
        let ended = self.writer.stop();
        if let Some(trouble) = ended.trouble {
            tracing::error!(n_waiting = ended.n_waiting, cause = %trouble.error, "last readings not written");
        }
        tracing::info!("daemon stopped");
    }

    /// The beat proves that the writer's thread lives: a disk that hangs inside a write stops it.
    fn tell_systemd(&mut self) {
        let status = self.written.borrow_and_update().clone();
        let idle = status.committed >= self.pushed;
        if idle || status != self.last_status {
            self.writer_seen = clock::instant();
        }
        notify(&[NotifyState::Status(&status_line(&self.site, &status))]);
        self.last_status = status;
        if clock::instant().saturating_duration_since(self.writer_seen) < WRITER_MAY_HANG {
            notify(&[NotifyState::Watchdog]);
        }
    }
}

fn status_line(site: &Site, status: &WriterStatus) -> String {
    let written = match &status.trouble {
        None => format!("last row {}", status.last_seq),
        Some(trouble) => format!(
            "ledger not written, {} batches wait: {}",
            status.n_waiting, trouble.error
        ),
    };
    format!(
        "{} points on {} lines, {written}",
        site.points.len(),
        site.lines.len()
    )
}

/// The ids of the site's points in the ledger, new ones given.
fn point_ids(ledger: &mut Ledger, site: &Site) -> Result<Vec<PointId>, LedgerError> {
    site.points
        .iter()
        .map(|p| ledger.point(&p.tag, p.quantity))
        .collect()
}

/// Held while the daemon runs: two daemons on one ledger would each write every reading.
fn lock(ledger: &Path) -> Result<File, DaemonError> {
    let mut path = ledger.as_os_str().to_owned();
    path.push("-daemon");
    let system = |source| DaemonError::System {
        what: "the daemon's lock file beside the ledger",
        source,
    };
    let file = File::options()
        .create(true)
        .truncate(false)
        .write(true)
        .open(PathBuf::from(path))
        .map_err(system)?;
    match rustix::fs::flock(&file, rustix::fs::FlockOperation::NonBlockingLockExclusive) {
        Ok(()) => Ok(file),
        Err(rustix::io::Errno::WOULDBLOCK) => Err(DaemonError::AlreadyRunning {
            path: ledger.to_owned(),
        }),
        Err(errno) => Err(system(errno.into())),
    }
}

/// The tasks that own the ports.
struct Lines {
    stop: watch::Sender<bool>,
    tasks: Vec<JoinHandle<()>>,
}

impl Lines {
    fn start(site: &Arc<Site>, to_hub: &mpsc::Sender<FromLine>) -> Self {
        let (stop, stopped) = watch::channel(false);
        let tasks = (0..site.lines.len())
            .map(|line| {
                tokio::spawn(supervise(
                    Arc::clone(site),
                    line,
                    to_hub.clone(),
                    stopped.clone(),
                ))
            })
            .collect();
        Self { stop, tasks }
    }

    async fn stop(&mut self) {
        self.stop.send_replace(true);
        for task in self.tasks.drain(..) {
            // A line that cannot end within two seconds is left behind; its port closes with the process.
            drop(tokio::time::timeout(Duration::from_secs(2), task).await);
        }
    }
}

/// Runs one line's task, and starts it again should it panic: a fault in one decoder stops no other line.
async fn supervise(
    site: Arc<Site>,
    line: usize,
    to_hub: mpsc::Sender<FromLine>,
    stop: watch::Receiver<bool>,
) {
    loop {
        let task = tokio::spawn(run_line(
            Arc::clone(&site),
            line,
            to_hub.clone(),
            stop.clone(),
        ));
        match task.await {
            Ok(()) => return,
            Err(fault) => {
                tracing::error!(line = %site.lines[line].name, cause = %fault, "line task failed");
                let cause = "the line's task failed and is started again".to_owned();
                if to_hub
                    .send(FromLine::Lost {
                        line,
                        cause,
                        at: clock::now(),
                    })
                    .await
                    .is_err()
                {
                    return;
                }
                tokio::time::sleep(Duration::from_secs(1)).await;
            }
        }
    }
}

/// A third of what systemd allows, or every ten seconds for the status line alone.
fn beat_every() -> Duration {
    sd_notify::watchdog_enabled().map_or(Duration::from_secs(10), |allowed| {
        (allowed / 3).max(Duration::from_millis(100))
    })
}

/// Tells systemd, if it listens.
fn notify(states: &[NotifyState<'_>]) {
    if let Err(error) = sd_notify::notify(states) {
        tracing::debug!(cause = %error, "systemd not told");
    }
}
