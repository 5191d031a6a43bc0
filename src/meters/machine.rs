//! # One line: what its task is to do next, whatever is spoken on it

use super::counters::Counters;
use super::modbus::Bus;
use super::query::Asker;
use super::sample::Sample;
use super::stream::Listener;
use super::text::PatternError;
use crate::config::site::{Framing, Line, Parity, Protocol, Site};
use std::time::{Duration, Instant};

/// What the owner of the port is to do, in order.
#[derive(Debug, Clone, PartialEq)]
pub enum Action {
    /// Write these bytes.
    Send(Vec<u8>),
    /// Hand on this sample; its last byte was in the bytes just given.
    Deliver(Sample),
    /// The port is there and the meter says nothing that can be used.
    Silent {
        /// Index into [`Site::meters`].
        meter: usize,
        /// Since when.
        since: Instant,
        /// What was heard instead.
        cause: String,
    },
    /// A silent meter gave a sample.
    Back {
        /// Index into [`Site::meters`].
        meter: usize,
        /// How long it had been silent.
        away: Duration,
    },
}

/// The state of one line. No port, no clock: bytes and moments come in, [`Action`]s go out.
#[derive(Debug)]
pub enum LineMachine {
    /// Meters that talk on their own.
    Stream(Listener),
    /// Text meters that are asked.
    Query(Asker),
    /// A Modbus RTU bus.
    Modbus(Bus),
}

impl LineMachine {
    /// For the line at index `line` of the site. `now` is only the moment from which silence counts until the line opens.
    ///
    /// # Errors
    /// When a pattern does not compile, which a checked site does not have.
    pub fn new(site: &Site, line: usize, now: Instant) -> Result<Self, PatternError> {
        let protocol = site
            .lines
            .get(line)
            .map_or(Protocol::Stream, |l| l.protocol);
        Ok(match protocol {
            Protocol::Stream => Self::Stream(Listener::new(site, line, now)?),
            Protocol::Query => Self::Query(Asker::new(site, line, now)?),
            Protocol::ModbusRtu => Self::Modbus(Bus::new(site, line, now)),
        })
    }

    /// The port was opened, for the first time or again.
    pub fn on_open(&mut self, now: Instant) {
        match self {
            Self::Stream(listener) => listener.on_open(now),
            Self::Query(asker) => asker.on_open(now),
            Self::Modbus(bus) => bus.on_open(now),
        }
    }

    /// These bytes had arrived by `now`.
    pub fn on_bytes(&mut self, bytes: &[u8], now: Instant) -> Vec<Action> {
        self.counters_mut().bytes += bytes.len() as u64;
        match self {
            Self::Stream(listener) => listener.on_bytes(bytes, now),
            Self::Query(asker) => asker.on_bytes(bytes, now),
            Self::Modbus(bus) => bus.on_bytes(bytes, now),
        }
    }

    /// The moment of [`wake_at`](Self::wake_at) has come, and everything heard before it was given to [`on_bytes`](Self::on_bytes).
    pub fn on_wake(&mut self, now: Instant) -> Vec<Action> {
        match self {
            Self::Stream(listener) => listener.on_wake(now),
            Self::Query(asker) => asker.on_wake(now),
            Self::Modbus(bus) => bus.on_wake(now),
        }
    }

    /// When to call [`on_wake`](Self::on_wake); asked again after every other call.
    pub fn wake_at(&self) -> Option<Instant> {
        match self {
            Self::Stream(listener) => listener.wake_at(),
            Self::Query(asker) => asker.wake_at(),
            Self::Modbus(bus) => bus.wake_at(),
        }
    }

    /// What became of everything so far.
    pub fn counters(&self) -> &Counters {
        match self {
            Self::Stream(listener) => &listener.counters,
            Self::Query(asker) => &asker.counters,
            Self::Modbus(bus) => &bus.counters,
        }
    }

    /// For what the owner of the port counts.
    pub(crate) fn counters_mut(&mut self) -> &mut Counters {
        match self {
            Self::Stream(listener) => &mut listener.counters,
            Self::Query(asker) => &mut asker.counters,
            Self::Modbus(bus) => &mut bus.counters,
        }
    }
}

/// Time that so many bytes spend on the wire.
pub(crate) fn wire_time(line: Option<&Line>, n_bytes: usize) -> Duration {
    let Some(Framing {
        baud,
        data_bits,
        parity,
        stop_bits,
    }) = line.map(|l| l.framing)
    else {
        return Duration::ZERO;
    };
    let bits = 1 + u64::from(data_bits) + u64::from(parity != Parity::None) + u64::from(stop_bits);
    Duration::from_micros(1_000_000 * bits * n_bytes as u64 / u64::from(baud.max(1)))
}
