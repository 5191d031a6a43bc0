//! # Text meters that answer when they are asked
//!
//! Always: an answer is taken only while its question is out, and no question is out while an older answer may still come.

use super::counters::{Counters, Reason};
use super::machine::{Action, wire_time};
use super::splitter::{Piece, Splitter};
use super::text::{PatternError, TextDecoder};
use super::turns::{Change, Failure, Turn, Turns};
use crate::config::site::{Site, Source};
use std::time::{Duration, Instant};

/// The asking side of a query line.
#[derive(Debug)]
pub struct Asker {
    pub(super) counters: Counters,
    splitter: Splitter,
    turns: Turns,
    questions: Vec<Question>,
    /// Why the last line heard since the question was not taken.
    heard_instead: Option<Reason>,
}

#[derive(Debug)]
struct Question {
    ask: Vec<u8>,
    wire: Duration,
    decoder: TextDecoder,
}

impl Asker {
    pub(super) fn new(site: &Site, line: usize, now: Instant) -> Result<Self, PatternError> {
        let mut terminator = None;
        let (mut questions, mut turns) = (Vec::new(), Vec::new());
        for (idx, meter) in site
            .meters
            .iter()
            .enumerate()
            .filter(|(_, m)| m.line == line)
        {
            if let Source::Query {
                ask,
                every,
                timeout,
                text,
            } = &meter.source
            {
                terminator = terminator.or_else(|| text.terminator.clone());
                questions.push(Question {
                    ask: ask.clone(),
                    wire: wire_time(site.lines.get(line), ask.len()),
                    decoder: TextDecoder::new(idx, meter, text)?,
                });
                turns.push(Turn::new(idx, *every, *timeout, now));
            }
        }
        Ok(Self {
            counters: Counters::new(turns.iter().map(|t| t.meter)),
            splitter: Splitter::new(terminator),
            turns: Turns::new(turns, Duration::from_millis(2), false),
            questions,
            heard_instead: None,
        })
    }

    pub(super) fn on_open(&mut self, now: Instant) {
        self.splitter.opened(now);
        self.turns.opened(now);
        self.heard_instead = None;
    }

    pub(super) fn on_bytes(&mut self, bytes: &[u8], now: Instant) -> Vec<Action> {
        self.turns.heard(now);
        let mut actions = Vec::new();
        for piece in self.splitter.push(bytes, now) {
            self.counters.lines += 1;
            let (reason, bytes) = match piece {
                Piece::TooLong(beginning) => (Reason::TooLong, beginning),
                Piece::Half(half) => (Reason::HalfLine, half),
                Piece::Line(line) => match self.judge(&line, now, &mut actions) {
                    Ok(()) => continue,
                    Err(reason) => (reason, line),
                },
            };
            if reason != Reason::Echo {
                self.heard_instead = Some(reason);
            }
            self.counters.reject(reason, &bytes);
        }
        actions
    }

    fn judge(
        &mut self,
        line: &[u8],
        now: Instant,
        actions: &mut Vec<Action>,
    ) -> Result<(), Reason> {
        let (turn, asked) = self.turns.awaited().ok_or(Reason::Unasked)?;
        let question = self.questions.get(turn).ok_or(Reason::Unasked)?;
        let sample = question.take(line)?;
        let meter = sample.meter;
        self.counters.meter(meter, |m| {
            m.samples += 1;
            m.latency = now.saturating_duration_since(asked);
            m.latency_max = m.latency_max.max(m.latency);
        });
        actions.extend(told(meter, self.turns.answered(turn, now), ""));
        actions.push(Action::Deliver(sample));
        Ok(())
    }

    pub(super) fn on_wake(&mut self, now: Instant) -> Vec<Action> {
        let mut actions = Vec::new();
        if let Some(turn) = self.turns.expired(now) {
            let meter = self.turns.turn(turn).map_or(0, |t| t.meter);
            self.counters.meter(meter, |m| m.timeouts += 1);
            let cause = match self.heard_instead {
                Some(reason) => format!("its last answer was no use: {}", reason.name()),
                None if self.splitter.in_a_line() => "its last answer had no end".to_owned(),
                None => "no answer".to_owned(),
            };
            actions.extend(told(
                meter,
                self.turns.failed(turn, Failure::NoAnswer, now),
                &cause,
            ));
        }
        if let Some(turn) = self.turns.next(now, self.splitter.in_a_line())
            && let Some(question) = self.questions.get(turn)
        {
            let left = self.splitter.restart();
            if !left.is_empty() {
                self.counters.reject(Reason::Unasked, &left);
            }
            self.heard_instead = None;
            self.counters
                .meter(question.decoder.meter(), |m| m.asked += 1);
            actions.push(Action::Send(question.ask.clone()));
            self.turns.asked(turn, now, question.wire);
        }
        actions
    }

    pub(super) fn wake_at(&self) -> Option<Instant> {
        self.turns.wake_at(self.splitter.in_a_line())
    }
}

impl Question {
    /// The sample in an answer, behind the echo of the question if the line echoes.
    fn take(&self, line: &[u8]) -> Result<super::sample::Sample, Reason> {
        let asked = self.ask.trim_ascii();
        let rest = line.strip_prefix(asked).filter(|_| !asked.is_empty());
        match rest {
            Some(rest) if rest.trim_ascii().is_empty() => Err(Reason::Echo),
            // A question made of figures could be the beginning of a figure.
            Some(rest)
                if !asked
                    .iter()
                    .all(|b| b.is_ascii_digit() || b"+-.,eE ".contains(b)) =>
            {
                self.decoder
                    .decode(rest)
                    .or_else(|_| self.decoder.decode(line))
            }
            Some(_) | None => self.decoder.decode(line),
        }
    }
}

/// The action that tells of a change.
pub(super) fn told(meter: usize, change: Change, cause: &str) -> Option<Action> {
    match change {
        Change::None => None,
        Change::Silent { since } => Some(Action::Silent {
            meter,
            since,
            cause: cause.to_owned(),
        }),
        Change::Back { away } => Some(Action::Back { meter, away }),
    }
}
