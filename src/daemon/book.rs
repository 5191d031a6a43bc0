//! # Keeping up with what stands
//!
//! The command line writes calibrations, placements and holds into the ledger; a thread looks whether anything has changed
//! (`PRAGMA data_version`, a microsecond a look) and hands what stands now to the hub:
//! the book, and each electrode's track run over it, which takes a while and so has a thread of its own.

use crate::electrode::history::Book;
use crate::ledger::{LedgerError, Reader};
use crate::pipeline::Standing;
use std::path::PathBuf;
use std::sync::Arc;
use std::sync::mpsc::{RecvTimeoutError, Sender, channel};
use std::thread::JoinHandle;
use std::time::Duration;
use tokio::sync::watch;

/// How often the ledger is looked at: a calibration is in force well within a second.
const LOOK: Duration = Duration::from_millis(200);

/// The thread that keeps up with the book.
#[derive(Debug)]
pub struct BookWatch {
    stop: Option<Sender<()>>,
    thread: Option<JoinHandle<()>>,
    standing: watch::Receiver<Arc<Standing>>,
}

impl BookWatch {
    /// Reads the book and begins to watch.
    ///
    /// # Errors
    /// When the ledger cannot be read.
    pub fn start(ledger: PathBuf) -> Result<Self, LedgerError> {
        let reader = Reader::open(&ledger)?;
        let mut keeper = Keeper {
            reader,
            ledger,
            book: Book::default(),
            standing: Arc::default(),
            last: 0,
            version: None,
        };
        keeper.catch_up()?;
        let (tell, standing) = watch::channel(keeper.standing());
        let (stop, stopped) = channel();
        let spawn = move || {
            let mut failing = false;
            while matches!(stopped.recv_timeout(LOOK), Err(RecvTimeoutError::Timeout)) {
                match keeper.catch_up() {
                    Ok(true) => {
                        tell.send_replace(keeper.standing());
                        failing = false;
                    }
                    Ok(false) => failing = false,
                    Err(error) => {
                        if !failing {
                            tracing::warn!(cause = %crate::daemon::chain(&error), "book not readable");
                        }
                        failing = true;
                        keeper.reopen();
                    }
                }
            }
        };
        let thread = std::thread::Builder::new()
            .name("book".to_owned())
            .spawn(spawn)
            .ok();
        Ok(Self {
            stop: Some(stop),
            thread,
            standing,
        })
    }

    /// What stands, and word of its changes.
    pub fn standing(&self) -> watch::Receiver<Arc<Standing>> {
        self.standing.clone()
    }
}

impl Drop for BookWatch {
    fn drop(&mut self) {
        drop(self.stop.take());
        if let Some(thread) = self.thread.take() {
            // A panic in the thread has been reported by the panic hook; there is nothing to add.
            drop(thread.join());
        }
    }
}

struct Keeper {
    reader: Reader,
    ledger: PathBuf,
    book: Book,
    standing: Arc<Standing>,
    last: i64,
    version: Option<i64>,
}

impl Keeper {
    fn standing(&mut self) -> Arc<Standing> {
        self.standing = Arc::new(self.standing.with(Arc::new(self.book.clone())));
        Arc::clone(&self.standing)
    }

    /// Enters what is new; says whether anything was.
    fn catch_up(&mut self) -> Result<bool, LedgerError> {
        let version = self.reader.data_version()?;
        if self.version == Some(version) {
            return Ok(false);
        }
        let fresh = self.reader.events(self.last)?;
        self.version = Some(version);
        let any = !fresh.is_empty();
        for event in fresh {
            self.last = event.id;
            event.enter(&mut self.book);
        }
        Ok(any)
    }

    /// After an error the connection may hold stale pages; a fresh one tells the truth.
    fn reopen(&mut self) {
        if let Ok(reader) = Reader::open(&self.ledger) {
            self.reader = reader;
            self.version = None;
        }
    }
}
