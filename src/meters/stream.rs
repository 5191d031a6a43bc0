//! # Meters that talk on their own
//!
//! Several may share a line; each takes the lines that its pattern is in.

use super::counters::{Counters, Reason};
use super::machine::Action;
use super::splitter::{Piece, Splitter};
use super::text::{PatternError, TextDecoder};
use crate::config::site::{Site, Source};
use std::time::{Duration, Instant};

/// A talker without a sample for so long counts as silent.
pub const SILENT_AFTER: Duration = Duration::from_secs(30);

/// The listening side of a stream line.
#[derive(Debug)]
pub struct Listener {
    pub(super) counters: Counters,
    splitter: Splitter,
    talkers: Vec<Talker>,
}

#[derive(Debug)]
struct Talker {
    decoder: TextDecoder,
    last: Instant,
    told_silent: bool,
    lines_before: u64,
}

impl Listener {
    pub(super) fn new(site: &Site, line: usize, now: Instant) -> Result<Self, PatternError> {
        let mut terminator = None;
        let mut talkers = Vec::new();
        for (idx, meter) in site
            .meters
            .iter()
            .enumerate()
            .filter(|(_, m)| m.line == line)
        {
            if let Source::Stream { text } = &meter.source {
                terminator = terminator.or_else(|| text.terminator.clone());
                let decoder = TextDecoder::new(idx, meter, text)?;
                talkers.push(Talker {
                    decoder,
                    last: now,
                    told_silent: false,
                    lines_before: 0,
                });
            }
        }
        let counters = Counters::new(talkers.iter().map(|t| t.decoder.meter()));
        Ok(Self {
            counters,
            splitter: Splitter::new(terminator),
            talkers,
        })
    }

    pub(super) fn on_open(&mut self, now: Instant) {
        self.splitter.opened(now);
        for talker in &mut self.talkers {
            (talker.last, talker.told_silent, talker.lines_before) =
                (now, false, self.counters.lines);
        }
    }

    pub(super) fn on_bytes(&mut self, bytes: &[u8], now: Instant) -> Vec<Action> {
        let mut actions = Vec::new();
        for piece in self.splitter.push(bytes, now) {
            self.counters.lines += 1;
            match piece {
                Piece::Line(line) => self.take(&line, now, &mut actions),
                Piece::TooLong(beginning) => self.counters.reject(Reason::TooLong, &beginning),
                Piece::Half(half) => self.counters.reject(Reason::HalfLine, &half),
            }
        }
        actions
    }

    fn take(&mut self, line: &[u8], now: Instant, actions: &mut Vec<Action>) {
        // What a line was rejected for by the meter that came nearest to taking it.
        let mut worst = Some(Reason::NoMatch);
        for talker in &mut self.talkers {
            match talker.decoder.decode(line) {
                Ok(sample) => {
                    worst = None;
                    self.counters.meter(sample.meter, |m| m.samples += 1);
                    if std::mem::take(&mut talker.told_silent) {
                        let away = now.saturating_duration_since(talker.last);
                        actions.push(Action::Back {
                            meter: sample.meter,
                            away,
                        });
                    }
                    talker.last = now;
                    talker.lines_before = self.counters.lines;
                    actions.push(Action::Deliver(sample));
                }
                Err(Reason::NoMatch) => {}
                Err(reason) => worst = worst.map(|_| reason),
            }
        }
        if let Some(reason) = worst {
            self.counters.reject(reason, line);
        }
    }

    pub(super) fn on_wake(&mut self, now: Instant) -> Vec<Action> {
        let lines = self.counters.lines;
        let silent = self
            .talkers
            .iter_mut()
            .filter(|t| !t.told_silent && now >= t.last + SILENT_AFTER);
        silent
            .map(|talker| {
                talker.told_silent = true;
                let cause = match lines - talker.lines_before {
                    0 => "nothing was heard".to_owned(),
                    n => format!("{n} lines were heard, and its pattern is in none of them"),
                };
                Action::Silent {
                    meter: talker.decoder.meter(),
                    since: talker.last,
                    cause,
                }
            })
            .collect()
    }

    pub(super) fn wake_at(&self) -> Option<Instant> {
        self.talkers
            .iter()
            .filter(|t| !t.told_silent)
            .map(|t| t.last + SILENT_AFTER)
            .min()
    }
}
