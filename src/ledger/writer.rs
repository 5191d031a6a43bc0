//! # The writer: the daemon's only way into the ledger
//!
//! in: batches, in order. out: the ticket up to which they are synced, or why they are waiting.
//! Always: 1. one transaction per window, all that waits in it. 2. acknowledged after the commit only. 3. nothing that waits is lost but what is
//! older than [`LONGEST_WAIT`]; that is counted and becomes an event. 4. pushing never waits for the disk.
//! Not here: the clock; it comes in as [`Clock`].

use super::book;
use super::chores::Chores;
use super::error::LedgerError;
use super::event::{Body, NewEvent};
use super::schema;
use super::store::{Batch, Ledger};
use crate::electrode::units::Timestamp;
use std::collections::VecDeque;
use std::path::{Path, PathBuf};
use std::sync::{Arc, Condvar, Mutex, MutexGuard, PoisonError};
use std::thread::JoinHandle;
use std::time::{Duration, Instant};
use tokio::sync::watch;

/// How long readings wait for a ledger that cannot be written before the oldest are dropped.
pub const LONGEST_WAIT: Duration = Duration::from_hours(1);

/// How often the hour is looked at when nothing arrives.
const LOOK_AROUND: Duration = Duration::from_mins(1);

/// The clocks, as functions.
#[derive(Debug, Clone, Copy)]
pub struct Clock {
    /// Wall time.
    pub now: fn() -> Timestamp,
    /// Monotonic time.
    pub instant: fn() -> Instant,
}

/// How the writer stands; published after every try.
#[derive(Debug, Clone, PartialEq, Eq, Default)]
pub struct WriterStatus {
    /// Every batch up to this ticket is synced (or its rows were dropped and counted); 0 before the first.
    pub committed: u64,
    /// Sequence number of the last synced row; 0 before this run has committed.
    pub last_seq: i64,
    /// Batches that wait.
    pub n_waiting: usize,
    /// Readings dropped in this run.
    pub n_dropped: u64,
    /// Why they wait, when the last try failed.
    pub trouble: Option<Trouble>,
}

/// Why nothing is committed.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Trouble {
    /// Since when.
    pub since: Timestamp,
    /// What the last try met, causes included.
    pub error: String,
    /// What to do.
    pub remedy: &'static str,
}

/// The writer thread and the queue before it.
#[derive(Debug)]
pub struct Writer {
    shared: Arc<Shared>,
    status: watch::Receiver<WriterStatus>,
    thread: Option<JoinHandle<()>>,
}

#[derive(Debug)]
struct Shared {
    clock: Clock,
    queue: Mutex<Queue>,
    changed: Condvar,
}

#[derive(Debug, Default)]
struct Queue {
    waiting: VecDeque<Waiting>,
    last_ticket: u64,
    dropped: Option<Dropped>,
    n_dropped: u64,
    stopping: bool,
}

#[derive(Debug)]
struct Waiting {
    ticket: u64,
    since: Instant,
    batch: Batch,
}

/// Readings dropped and not yet recorded as dropped.
#[derive(Debug, Clone, Copy)]
struct Dropped {
    n: u64,
    from: Timestamp,
    to: Timestamp,
}

impl Writer {
    /// Opens the ledger at `path` and starts the thread that commits once per `window`.
    ///
    /// # Errors
    /// As [`Ledger::open`]; [`LedgerError::System`] when no thread can be started.
    pub fn start(path: &Path, window: Duration, clock: Clock) -> Result<Self, LedgerError> {
        let ledger = Ledger::open(path)?;
        let lock_limit = window.min(schema::BUSY_TIMEOUT);
        ledger.wait_for_locks(lock_limit)?;
        let shared = Arc::new(Shared {
            clock,
            queue: Mutex::default(),
            changed: Condvar::new(),
        });
        let (publish, status) = watch::channel(WriterStatus::default());
        let task = Task {
            path: path.to_path_buf(),
            ledger: Some(ledger),
            lock_limit,
            window,
            shared: Arc::clone(&shared),
            publish,
            chores: Chores::default(),
        };
        let thread = std::thread::Builder::new()
            .name("ledger".to_owned())
            .spawn(move || task.run())
            .map_err(|source| LedgerError::System {
                doing: "start the writer",
                path: path.to_path_buf(),
                source,
            })?;
        Ok(Self {
            shared,
            status,
            thread: Some(thread),
        })
    }

    /// Hands over a batch; its ticket comes back. Never waits for the disk.
    ///
    /// # Errors
    /// [`LedgerError::UnstorableEvent`]: the batch is not taken.
    pub fn push(&self, batch: Batch) -> Result<u64, LedgerError> {
        for event in &batch.events {
            book::text_of(&event.body)?;
        }
        let since = (self.shared.clock.instant)();
        let mut queue = self.shared.lock();
        queue.last_ticket += 1;
        let ticket = queue.last_ticket;
        queue.waiting.push_back(Waiting {
            ticket,
            since,
            batch,
        });
        queue.drop_older_than(LONGEST_WAIT, since);
        drop(queue);
        self.shared.changed.notify_one();
        Ok(ticket)
    }

    /// How the writer stands, now and whenever it changes.
    pub fn status(&self) -> watch::Receiver<WriterStatus> {
        self.status.clone()
    }

    /// Commits what waits, ends the thread and says how it ended: `n_waiting` is what could not be written.
    pub fn stop(mut self) -> WriterStatus {
        self.finish();
        self.status.borrow().clone()
    }

    fn finish(&mut self) {
        self.shared.lock().stopping = true;
        self.shared.changed.notify_one();
        if let Some(thread) = self.thread.take() {
            // A panic of the thread has been reported by the panic hook; the status says how far it came.
            drop(thread.join());
        }
    }
}

impl Drop for Writer {
    fn drop(&mut self) {
        self.finish();
    }
}

impl Shared {
    /// The queue is whole whenever the lock is free, so a panic elsewhere does not spoil it.
    fn lock(&self) -> MutexGuard<'_, Queue> {
        self.queue.lock().unwrap_or_else(PoisonError::into_inner)
    }
}

impl Queue {
    /// Drops the rows and the state of lines, never the events, of what waits for longer than `limit`.
    fn drop_older_than(&mut self, limit: Duration, now: Instant) {
        for old in &mut self.waiting {
            if now.saturating_duration_since(old.since) <= limit {
                break;
            }
            old.batch.lines.clear();
            for (_, reading) in std::mem::take(&mut old.batch.rows) {
                self.n_dropped += 1;
                let dropped = self.dropped.get_or_insert(Dropped {
                    n: 0,
                    from: reading.at,
                    to: reading.at,
                });
                dropped.n += 1;
                dropped.to = reading.at;
            }
        }
        while self.waiting.len() > 1
            && self.waiting.front().is_some_and(|old| {
                old.batch == Batch::default() && now.saturating_duration_since(old.since) > limit
            })
        {
            self.waiting.pop_front();
        }
    }
}

struct Task {
    path: PathBuf,
    ledger: Option<Ledger>,
    lock_limit: Duration,
    window: Duration,
    shared: Arc<Shared>,
    publish: watch::Sender<WriterStatus>,
    chores: Chores,
}

impl Task {
    fn run(mut self) {
        let mut next = (self.shared.clock.instant)();
        loop {
            let is_idle = self.chores.are_done((self.shared.clock.now)());
            let (work, dropped, stopping) = self.wait(next, is_idle);
            if !work.is_empty() {
                next = (self.shared.clock.instant)() + self.window;
                self.commit(work, dropped);
            }
            if stopping {
                return;
            }
            if let Some(ledger) = &mut self.ledger {
                let standing = {
                    let status = self.publish.borrow();
                    (status.n_waiting, status.n_dropped)
                };
                self.chores
                    .note(ledger, (self.shared.clock.now)(), standing);
                self.chores.do_some(ledger, (self.shared.clock.now)());
            }
        }
    }

    /// Waits for something to commit and for the window's end; stopping and chores end both.
    fn wait(&self, next: Instant, is_idle: bool) -> (VecDeque<Waiting>, Option<Dropped>, bool) {
        let mut queue = self.shared.lock();
        let mut is_over = !is_idle;
        loop {
            let left = next.saturating_duration_since((self.shared.clock.instant)());
            if queue.stopping || (!queue.waiting.is_empty() && left.is_zero()) {
                let work = std::mem::take(&mut queue.waiting);
                return (work, queue.dropped.take(), queue.stopping);
            }
            if is_over {
                return (VecDeque::new(), None, false);
            }
            let is_empty = queue.waiting.is_empty();
            let limit = if is_empty { LOOK_AROUND } else { left };
            let waited = self.shared.changed.wait_timeout(queue, limit);
            let (locked, timeout) = waited.unwrap_or_else(PoisonError::into_inner);
            queue = locked;
            is_over = is_empty && timeout.timed_out();
        }
    }

    /// One transaction; on failure everything goes back to the head of the queue.
    fn commit(&mut self, work: VecDeque<Waiting>, dropped: Option<Dropped>) {
        let now = (self.shared.clock.now)();
        let note = dropped.map(|dropped| Batch {
            rows: Vec::new(),
            lines: Vec::new(),
            events: vec![NewEvent {
                at: dropped.to,
                entered: now,
                by: "halfcell".to_owned(),
                body: Body::ReadingsDropped {
                    n: dropped.n,
                    from: dropped.from,
                    to: dropped.to,
                },
            }],
        });
        let batches = note.iter().chain(work.iter().map(|waiting| &waiting.batch));
        let began = (self.shared.clock.instant)();
        let tried = match &mut self.ledger {
            Some(ledger) => ledger.append_batches(batches),
            // A file that is gone is not made anew: an unmounted disk would get a second ledger.
            None => Ledger::open_existing(&self.path).and_then(|mut ledger| {
                ledger.wait_for_locks(self.lock_limit)?;
                let appended = ledger.append_batches(batches);
                self.ledger = Some(ledger);
                appended
            }),
        };
        match tried {
            Ok(appended) => {
                let ended = (self.shared.clock.instant)();
                self.chores
                    .committed(ended.saturating_duration_since(began));
                if let Some(seq) = appended.stepped_at {
                    self.chores.clock_stepped(seq, now);
                }
                let committed = work.back().map_or(0, |last| last.ticket);
                let queue = self.shared.lock();
                self.publish.send_modify(|status| {
                    status.committed = committed;
                    status.last_seq = appended.last_seq.unwrap_or(status.last_seq);
                    status.n_waiting = queue.waiting.len();
                    status.n_dropped = queue.n_dropped;
                    status.trouble = None;
                });
            }
            Err(error) => self.put_back(work, dropped, &error, now),
        }
    }

    fn put_back(
        &mut self,
        mut work: VecDeque<Waiting>,
        dropped: Option<Dropped>,
        error: &LedgerError,
        now: Timestamp,
    ) {
        if !matches!(error, LedgerError::Locked { .. } | LedgerError::Full { .. }) {
            // After an I/O error the connection may serve stale pages: the next try gets a fresh one.
            self.ledger = None;
        }
        let mut queue = self.shared.lock();
        work.append(&mut queue.waiting);
        queue.waiting = work;
        if let Some(before) = dropped {
            queue.dropped = Some(queue.dropped.map_or(before, |after| Dropped {
                n: before.n + after.n,
                from: before.from,
                to: after.to,
            }));
        }
        queue.drop_older_than(LONGEST_WAIT, (self.shared.clock.instant)());
        self.publish.send_modify(|status| {
            status.n_waiting = queue.waiting.len();
            status.n_dropped = queue.n_dropped;
            let since = status.trouble.as_ref().map_or(now, |trouble| trouble.since);
            status.trouble = Some(Trouble {
                since,
                error: with_causes(error),
                remedy: error.remedy(),
            });
        });
    }
}

/// The error and what stands behind it, outermost first.
fn with_causes(error: &dyn std::error::Error) -> String {
    let mut text = error.to_string();
    let mut cause = error.source();
    while let Some(inner) = cause {
        text = format!("{text}: {inner}");
        cause = inner.source();
    }
    text
}
