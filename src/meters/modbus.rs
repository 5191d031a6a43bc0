//! # A Modbus RTU bus: units polled in turn, adjacent registers in one request
//!
//! Always: 1. Only exactly the awaited answer is taken: unit, function, count and CRC. 2. A poll is one sample, stamped with its last answer.

use super::counters::{Counters, Reason};
use super::frame::{
    Answer, MOST_REGISTERS, answer_length, exception_name, figure, find, registers, request,
};
use super::machine::{Action, wire_time};
use super::query::told;
use super::sample::{Figure, Sample};
use super::turns::{Failure, Turn, Turns};
use crate::config::site::{Line, Meter, Register, Site, Source, Table};
use std::time::{Duration, Instant};

/// Bytes kept while an answer is awaited; more than the longest frame (256).
const KEPT: usize = 600;

/// The asking side of a Modbus line.
#[derive(Debug)]
pub struct Bus {
    pub(super) counters: Counters,
    turns: Turns,
    units: Vec<Unit>,
    heard: Vec<u8>,
}

#[derive(Debug)]
struct Unit {
    meter: usize,
    address: u8,
    requests: Vec<Request>,
    /// How many of the requests of this poll were answered.
    answered: usize,
    figures: Vec<Option<Figure>>,
}

/// Adjacent registers of one table.
#[derive(Debug)]
struct Request {
    table: Table,
    address: u16,
    count: u16,
    frame: Vec<u8>,
    wire: Duration,
    reads: Vec<Read>,
}

#[derive(Debug)]
struct Read {
    signal: usize,
    scale: f64,
    register: Register,
}

impl Bus {
    pub(super) fn new(site: &Site, line: usize, now: Instant) -> Self {
        let (mut units, mut turns) = (Vec::new(), Vec::new());
        let of_line = site.lines.get(line);
        for (idx, meter) in site
            .meters
            .iter()
            .enumerate()
            .filter(|(_, m)| m.line == line)
        {
            if let Source::Modbus {
                unit,
                every,
                timeout,
            } = meter.source
            {
                let requests = merged(unit, meter, of_line);
                if !requests.is_empty() {
                    let figures = vec![None; meter.signals.len()];
                    units.push(Unit {
                        meter: idx,
                        address: unit,
                        requests,
                        answered: 0,
                        figures,
                    });
                    turns.push(Turn::new(idx, every, timeout, now));
                }
            }
        }
        // 3.5 characters, and never less than 1.75 ms (MODBUS over Serial Line V1.02, section 2.5.1.1).
        let gap = (wire_time(of_line, 7) / 2).max(Duration::from_micros(1750));
        let counters = Counters::new(units.iter().map(|u| u.meter));
        Self {
            counters,
            turns: Turns::new(turns, gap, true),
            units,
            heard: Vec::new(),
        }
    }

    pub(super) fn on_open(&mut self, now: Instant) {
        self.turns.opened(now);
        self.heard.clear();
        for unit in &mut self.units {
            unit.begin();
        }
    }

    pub(super) fn on_bytes(&mut self, bytes: &[u8], now: Instant) -> Vec<Action> {
        if !bytes.is_empty() {
            self.turns.heard(now);
        }
        // However much arrives at once, little is held.
        bytes
            .chunks(KEPT / 2)
            .flat_map(|bytes| self.hear(bytes, now))
            .collect()
    }

    fn hear(&mut self, bytes: &[u8], now: Instant) -> Vec<Action> {
        let Some((turn, asked)) = self.turns.awaited() else {
            self.counters.reject(Reason::Unasked, bytes);
            return Vec::new();
        };
        self.heard.extend(bytes);
        let Some((unit, request)) = self.units.get_mut(turn).and_then(Unit::current) else {
            return Vec::new();
        };
        let Some((place, answer)) = find(&self.heard, unit.address, request.table, request.count)
        else {
            let old = self.heard.len().saturating_sub(KEPT / 2);
            if self.heard.len() > KEPT {
                let dropped: Vec<u8> = self.heard.drain(..old).collect();
                self.counters.reject(Reason::NotTheAnswer, &dropped);
            }
            return Vec::new();
        };
        let before = self.heard.get(..place.start).unwrap_or(&[]);
        if before == request.frame {
            self.counters.reject(Reason::Echo, before);
        } else if !before.is_empty() {
            self.counters.reject(Reason::NotTheAnswer, before);
        }
        let behind = self.heard.get(place.end..).unwrap_or(&[]);
        if !behind.is_empty() {
            self.counters.reject(Reason::Unasked, behind);
        }
        self.heard.clear();
        self.counters.lines += 1;
        self.counters.meter(unit.meter, |m| {
            m.latency = now.saturating_duration_since(asked);
            m.latency_max = m.latency_max.max(m.latency);
        });
        match answer {
            Answer::Registers(words) => self.take(turn, &words, now),
            Answer::Exception(code) => self.refused(turn, code, now),
        }
    }

    fn take(&mut self, turn: usize, words: &[u16], now: Instant) -> Vec<Action> {
        let Some(unit) = self.units.get_mut(turn) else {
            return Vec::new();
        };
        unit.read(words);
        if unit.answered < unit.requests.len() {
            self.turns.going_on(turn);
            return Vec::new();
        }
        let (meter, sample) = (unit.meter, unit.begin());
        let mut actions: Vec<Action> = told(meter, self.turns.answered(turn, now), "")
            .into_iter()
            .collect();
        actions.extend(self.delivered(sample));
        actions
    }

    fn refused(&mut self, turn: usize, code: u8, now: Instant) -> Vec<Action> {
        let Some(unit) = self.units.get_mut(turn) else {
            return Vec::new();
        };
        let cause = format!(
            "unit {} answers with exception {code}, {}",
            unit.address,
            exception_name(code)
        );
        let (meter, sample) = (unit.meter, unit.begin());
        self.counters.reject_as(Reason::Exception, cause.clone());
        let mut actions = self.delivered(sample);
        actions.extend(told(
            meter,
            self.turns.failed(turn, Failure::Refused, now),
            &cause,
        ));
        actions
    }

    /// What a poll gave, if anything.
    fn delivered(&mut self, sample: Sample) -> Vec<Action> {
        if sample.figures.iter().all(Option::is_none) {
            return Vec::new();
        }
        self.counters.meter(sample.meter, |m| m.samples += 1);
        vec![Action::Deliver(sample)]
    }

    pub(super) fn on_wake(&mut self, now: Instant) -> Vec<Action> {
        let mut actions = Vec::new();
        if let Some(turn) = self.turns.expired(now)
            && let Some(unit) = self.units.get_mut(turn)
        {
            let heard = std::mem::take(&mut self.heard);
            let cause = format!(
                "unit {}: {}",
                unit.address,
                if heard.is_empty() {
                    "no answer"
                } else {
                    "no right answer"
                }
            );
            let (meter, sample) = (unit.meter, unit.begin());
            if !heard.is_empty() {
                self.counters.reject(Reason::NotTheAnswer, &heard);
            }
            self.counters.meter(meter, |m| m.timeouts += 1);
            actions.extend(self.delivered(sample));
            actions.extend(told(
                meter,
                self.turns.failed(turn, Failure::NoAnswer, now),
                &cause,
            ));
        }
        if let Some(turn) = self.turns.next(now, false)
            && let Some((unit, request)) = self.units.get_mut(turn).and_then(Unit::current)
        {
            self.heard.clear();
            self.counters.meter(unit.meter, |m| m.asked += 1);
            actions.push(Action::Send(request.frame.clone()));
            self.turns.asked(turn, now, request.wire);
        }
        actions
    }

    pub(super) fn wake_at(&self) -> Option<Instant> {
        self.turns.wake_at(false)
    }
}

impl Unit {
    fn current(&mut self) -> Option<(&Self, &Request)> {
        let unit = &*self;
        unit.requests
            .get(unit.answered)
            .map(|request| (unit, request))
    }

    /// A new poll begins; what the last one gave comes back.
    fn begin(&mut self) -> Sample {
        self.answered = 0;
        let empty = vec![None; self.figures.len()];
        Sample {
            meter: self.meter,
            figures: std::mem::replace(&mut self.figures, empty),
            own_time: None,
        }
    }

    fn read(&mut self, words: &[u16]) {
        if let Some(request) = self.requests.get(self.answered) {
            for read in &request.reads {
                let from = usize::from(read.register.address - request.address);
                let said = words.get(from..).unwrap_or(&[]);
                if let Some(place) = self.figures.get_mut(read.signal) {
                    *place = figure(
                        said,
                        read.register.layout,
                        read.register.word_order,
                        read.scale,
                    );
                }
            }
        }
        self.answered += 1;
    }
}

/// The fewest requests that read all registers of a meter without reading one it does not name.
fn merged(unit: u8, meter: &Meter, line: Option<&Line>) -> Vec<Request> {
    let mut reads: Vec<Read> = meter
        .signals
        .iter()
        .enumerate()
        .filter_map(|(signal, s)| {
            s.register.map(|register| Read {
                signal,
                scale: s.scale,
                register,
            })
        })
        .collect();
    reads.sort_by_key(|read| (read.register.table, read.register.address));
    let mut groups: Vec<(u32, Vec<Read>)> = Vec::new();
    for read in reads {
        let from = u32::from(read.register.address);
        let end = from + u32::from(registers(read.register.layout));
        match groups.last_mut() {
            Some((last_end, group))
                if group.first().is_some_and(|first| {
                    first.register.table == read.register.table
                        && from <= *last_end
                        && end.max(*last_end) - u32::from(first.register.address)
                            <= u32::from(MOST_REGISTERS)
                }) =>
            {
                *last_end = end.max(*last_end);
                group.push(read);
            }
            _ => groups.push((end, vec![read])),
        }
    }
    let of_group = |(end, reads): (u32, Vec<Read>)| {
        let Register { table, address, .. } = reads.first()?.register;
        let count = u16::try_from(end - u32::from(address)).ok()?;
        let frame = request(unit, table, address, count);
        let wire = wire_time(line, frame.len() + answer_length(count));
        Some(Request {
            table,
            address,
            count,
            frame,
            wire,
            reads,
        })
    };
    groups.into_iter().filter_map(of_group).collect()
}
