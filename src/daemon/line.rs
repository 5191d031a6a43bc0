//! # The task that owns one port
//!
//! in: a site and the index of a line. out: [`FromLine`] on a bounded channel; while that is full the task waits and the kernel's buffer
//! of the port (4 kB) is the reserve. Always: 1. Nothing else holds the port. 2. A port that fails is let go at once, told once, and
//! tried again until it is back. 3. Other lines never notice.

use super::backoff::Backoff;
use super::chain;
use super::clock;
use super::hotplug::Hotplug;
use crate::config::site::{Device, Line, Site};
use crate::electrode::units::Timestamp;
use crate::meters::counters::Counters;
use crate::meters::machine::{Action, LineMachine};
use crate::meters::own_time::OwnClock;
use crate::meters::port::{Port, PortError};
use crate::meters::sample::Sample;
use std::path::Path;
use std::sync::Arc;
use std::time::{Duration, Instant};
use tokio::sync::{mpsc, watch};
use tracing::{info, warn};

/// A port that was open so long is well; one that falls sooner is tried again more slowly each time.
const WELL_AFTER: Duration = Duration::from_secs(10);

/// How often the counters are told.
const COUNTERS_EVERY: Duration = Duration::from_secs(10);

/// What a line's task tells.
#[derive(Debug, Clone, PartialEq)]
pub enum FromLine {
    /// A meter said something.
    Sample {
        /// What it said.
        sample: Sample,
        /// Wall time when its last byte had arrived.
        at: Timestamp,
        /// The same moment on the monotonic clock.
        instant: Instant,
    },
    /// The port is gone, or could not be opened at all; told once until it is back.
    Lost {
        /// Index into [`Site::lines`].
        line: usize,
        /// What happened and what to do.
        cause: String,
        /// When.
        at: Timestamp,
    },
    /// A lost port is open again.
    Back {
        /// Index into [`Site::lines`].
        line: usize,
        /// When.
        at: Timestamp,
        /// For how long it was lost.
        away_ms: u64,
    },
    /// The port is there and a meter on it says nothing that can be used.
    MeterSilent {
        /// Index into [`Site::meters`].
        meter: usize,
        /// Since when.
        since: Timestamp,
        /// What was heard instead.
        cause: String,
    },
    /// A silent meter is heard again.
    MeterBack {
        /// Index into [`Site::meters`].
        meter: usize,
        /// When.
        at: Timestamp,
        /// For how long it was silent.
        away_ms: u64,
    },
    /// The counters of the line: every 10 s, when its port comes or goes, and at its end.
    Counters {
        /// Index into [`Site::lines`].
        line: usize,
        /// The counts.
        counters: Box<Counters>,
    },
}

/// Why serving a port ended.
enum End {
    Stopped,
    Lost(std::io::Error),
}

/// Runs one line until `stop` turns true or is dropped, or nobody takes what it tells.
pub async fn run_line(
    site: Arc<Site>,
    line: usize,
    out: mpsc::Sender<FromLine>,
    mut stop: watch::Receiver<bool>,
) {
    let Some(of_line) = site.lines.get(line) else {
        return;
    };
    let machine = match LineMachine::new(&site, line, clock::instant()) {
        Ok(machine) => machine,
        Err(error) => {
            tell(
                &out,
                FromLine::Lost {
                    line,
                    cause: chain(&error),
                    at: clock::now(),
                },
            )
            .await;
            return;
        }
    };
    let mut task = Task {
        idx: line,
        line: of_line,
        zone: site.timezone,
        machine,
        out,
        lost: None,
    };
    let mut backoff = Backoff::of_a_port();
    loop {
        match Port::open(of_line) {
            Ok(port) => {
                let opened = clock::instant();
                let End::Lost(error) = task.serve(&port, &mut stop).await else {
                    break;
                };
                // The descriptor holds the adapter's name: let it go before anything else.
                drop(port);
                if clock::instant().saturating_duration_since(opened) >= WELL_AFTER {
                    backoff.reset();
                }
                task.lost(format!("line `{}`: {}", of_line.name, chain(&error)))
                    .await;
            }
            Err(error) => task.lost(explained(&error)).await,
        }
        if task.out.is_closed() {
            break;
        }
        if let Waited::Stopped = wait(of_line, backoff.wait(), &mut stop).await {
            break;
        }
    }
    task.tell_counters().await;
}

enum Waited {
    Stopped,
    Over,
}

/// Waits for the backoff; a device that appears cuts it short to the first step, which gives the system time to set its permissions.
async fn wait(line: &Line, backoff: Duration, stop: &mut watch::Receiver<bool>) -> Waited {
    let device = match &line.device {
        Device::Path(path) => path.as_path(),
        Device::UsbSerial(_) => Path::new("/dev/ttyUSB"),
    };
    let appeared = async {
        // Where nothing can be watched, the backoff alone does it.
        match Hotplug::new(device) {
            Ok(hotplug) if hotplug.appeared().await.is_ok() => {}
            Ok(_) | Err(_) => std::future::pending().await,
        }
    };
    tokio::select! {
        () = stopped(stop) => Waited::Stopped,
        () = tokio::time::sleep(backoff) => Waited::Over,
        () = appeared => tokio::select! {
            () = stopped(stop) => Waited::Stopped,
            () = tokio::time::sleep(Duration::from_millis(200).min(backoff)) => Waited::Over,
        },
    }
}

/// Resolves when the task is to end.
async fn stopped(stop: &mut watch::Receiver<bool>) {
    // An error means that nobody is left to say it.
    drop(stop.wait_for(|stop| *stop).await.map(drop));
}

struct Task<'a> {
    idx: usize,
    line: &'a Line,
    zone: chrono_tz::Tz,
    machine: LineMachine,
    out: mpsc::Sender<FromLine>,
    /// Since when the port is lost.
    lost: Option<Instant>,
}

impl Task<'_> {
    async fn opened(&mut self, port: &Port, bytes: &mut [u8]) -> std::io::Result<()> {
        let (at, now) = (clock::now(), clock::instant());
        self.machine.on_open(now);
        info!(line = %self.line.name, "line opened");
        if let Some(since) = self.lost.take() {
            let counters = self.machine.counters_mut();
            counters.reopenings += 1;
            counters.lost = None;
            let back = FromLine::Back {
                line: self.idx,
                at: clock::now(),
                away_ms: ms(now.saturating_duration_since(since)),
            };
            tell(&self.out, back).await;
        }
        self.tell_counters().await;
        // What is there already was said before anybody listened, however late it is read.
        loop {
            match port.read_now(bytes)? {
                0 => break,
                n => {
                    let actions = self.machine.on_bytes(bytes.get(..n).unwrap_or(&[]), now);
                    self.act(port, actions, at, now).await?;
                }
            }
        }
        Ok(())
    }

    async fn lost(&mut self, cause: String) {
        if self.lost.is_none() {
            self.lost = Some(clock::instant());
            warn!(line = %self.line.name, %cause, "line lost");
            self.machine.counters_mut().lost = Some(cause.clone());
            tell(
                &self.out,
                FromLine::Lost {
                    line: self.idx,
                    cause,
                    at: clock::now(),
                },
            )
            .await;
            self.tell_counters().await;
        }
    }

    async fn serve(&mut self, port: &Port, stop: &mut watch::Receiver<bool>) -> End {
        let mut bytes = [0_u8; 1024];
        if let Err(error) = self.opened(port, &mut bytes).await {
            return End::Lost(error);
        }
        let mut counters_due = clock::instant() + COUNTERS_EVERY;
        loop {
            let wake = self
                .machine
                .wake_at()
                .map_or(counters_due, |at| at.min(counters_due));
            tokio::select! {
                biased;
                () = stopped(stop) => return End::Stopped,
                () = self.out.closed() => return End::Stopped,
                read = port.read(&mut bytes) => match read {
                    Ok(n) => {
                        if let Err(error) = self.heard(port, bytes.get(..n).unwrap_or(&[])).await {
                            return End::Lost(error);
                        }
                    }
                    Err(error) => return End::Lost(error),
                },
                () = tokio::time::sleep_until(wake.into()) => {
                    if let Err(error) = self.wake(port, &mut bytes).await {
                        return End::Lost(error);
                    }
                    if clock::instant() >= counters_due {
                        counters_due += COUNTERS_EVERY;
                        self.tell_counters().await;
                    }
                }
            }
            // A line that never stops talking must still be asked, and its silent meters told.
            if self
                .machine
                .wake_at()
                .is_some_and(|at| at <= clock::instant())
                && let Err(error) = self.wake(port, &mut bytes).await
            {
                return End::Lost(error);
            }
        }
    }

    async fn heard(&mut self, port: &Port, bytes: &[u8]) -> std::io::Result<()> {
        let (at, instant) = (clock::now(), clock::instant());
        let actions = self.machine.on_bytes(bytes, instant);
        self.act(port, actions, at, instant).await
    }

    /// Takes what was heard before the moment, then lets the machine act on it.
    async fn wake(&mut self, port: &Port, bytes: &mut [u8]) -> std::io::Result<()> {
        // Bounded: at any rate that serial lines have, four reads empty the buffer of the kernel.
        for _ in 0..4 {
            match port.read_now(bytes)? {
                0 => break,
                n => self.heard(port, bytes.get(..n).unwrap_or(&[])).await?,
            }
        }
        let (at, instant) = (clock::now(), clock::instant());
        let actions = self.machine.on_wake(instant);
        self.act(port, actions, at, instant).await
    }

    async fn act(
        &mut self,
        port: &Port,
        actions: Vec<Action>,
        at: Timestamp,
        instant: Instant,
    ) -> std::io::Result<()> {
        for action in actions {
            let told = match action {
                Action::Send(bytes) => {
                    port.write(&bytes).await?;
                    continue;
                }
                Action::Deliver(sample) => {
                    if let Some(said) = &sample.own_time {
                        self.machine.counters_mut().meter(sample.meter, |m| {
                            m.clock = OwnClock::hearing(m.clock.take(), said, at, self.zone);
                        });
                    }
                    FromLine::Sample {
                        sample,
                        at,
                        instant,
                    }
                }
                Action::Silent {
                    meter,
                    since,
                    cause,
                } => {
                    let ago = i64::try_from(ms(instant.saturating_duration_since(since)))
                        .unwrap_or(i64::MAX);
                    FromLine::MeterSilent {
                        meter,
                        since: at.plus_ms(-ago),
                        cause,
                    }
                }
                Action::Back { meter, away } => FromLine::MeterBack {
                    meter,
                    at,
                    away_ms: ms(away),
                },
            };
            tell(&self.out, told).await;
        }
        Ok(())
    }

    async fn tell_counters(&mut self) {
        let counters = Box::new(self.machine.counters().clone());
        tell(
            &self.out,
            FromLine::Counters {
                line: self.idx,
                counters,
            },
        )
        .await;
    }
}

/// Waits for room. When nobody takes anything any more, `serve` sees it and ends.
async fn tell(out: &mpsc::Sender<FromLine>, message: FromLine) {
    drop(out.send(message).await);
}

fn ms(span: Duration) -> u64 {
    u64::try_from(span.as_millis()).unwrap_or(u64::MAX)
}

fn explained(error: &PortError) -> String {
    format!("{}; {}", chain(error), error.remedy())
}
