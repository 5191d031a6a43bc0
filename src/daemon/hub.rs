//! # The hub: where samples become rows
//!
//! in: what the lines say, the time, what stands. out: batches of rows and events for the writer.
//! No port, no file, no clock here: the task in `daemon/run.rs` brings all three.

use crate::config::site::{Point, SignalRef, Site, Temperature};
use crate::daemon::clock::Step;
use crate::daemon::line::FromLine;
use crate::electrode::units::Timestamp;
use crate::ledger::event::{Body, NewEvent};
use crate::ledger::{Batch, LineState, PointId};
use crate::meters::counters::Counters;
use crate::meters::report::LineReport;
use crate::meters::sample::{self, Sample};
use crate::pipeline::interval::Interval;
use crate::pipeline::{Arrival, Figure, Standing, read};
use std::sync::Arc;

/// The name under which the daemon enters events.
pub const DAEMON: &str = "halfcell";

/// Gathers samples per point and makes rows of them.
#[derive(Debug)]
pub struct Hub {
    site: Arc<Site>,
    ids: Vec<PointId>,
    intervals: Vec<Interval>,
    standing: Arc<Standing>,
    batch: Batch,
    /// A clock step that waits for the first reading after it.
    step: Option<Step>,
}

impl Hub {
    /// For a site whose points have these ids in the ledger.
    pub fn new(
        site: Arc<Site>,
        ids: Vec<PointId>,
        standing: Arc<Standing>,
        now: Timestamp,
    ) -> Self {
        let interval =
            |p: &Point| Interval::new(i64::try_from(p.every.as_millis()).unwrap_or(i64::MAX), now);
        let intervals = site.points.iter().map(interval).collect();
        Self {
            site,
            ids,
            intervals,
            standing,
            batch: Batch::default(),
            step: None,
        }
    }

    /// Another configuration: points of the same tag and interval keep what they have gathered.
    pub fn reload(&mut self, site: Arc<Site>, ids: Vec<PointId>, now: Timestamp) {
        let mut fresh = Self::new(site, ids, Arc::clone(&self.standing), now);
        for (n, point) in fresh.site.points.iter().enumerate() {
            let same = |old: &Point| old.tag == point.tag && old.every == point.every;
            if let Some(old) = self.site.points.iter().position(same) {
                std::mem::swap(&mut fresh.intervals[n], &mut self.intervals[old]);
            }
        }
        fresh.batch = std::mem::take(&mut self.batch);
        fresh.step = self.step;
        *self = fresh;
    }

    /// What is in force has changed.
    pub fn set_standing(&mut self, standing: Arc<Standing>) {
        self.standing = standing;
    }

    /// The wall clock jumped; the event goes with the first reading after it.
    pub fn clock_stepped(&mut self, step: Step) {
        let before = self.step.map_or(step.before, |earlier| earlier.before);
        self.step = Some(Step {
            before,
            after: step.after,
        });
    }

    /// Takes what a line says; `now` dates what carries no time of its own.
    pub fn take(&mut self, message: FromLine, now: Timestamp) {
        match message {
            FromLine::Sample { sample, at, .. } => self.take_sample(&sample, at),
            FromLine::Lost { line, cause, at } => {
                let line = self.line_name(line);
                self.event(at, Body::LineLost { line, cause });
            }
            FromLine::Back { line, at, away_ms } => {
                let line = self.line_name(line);
                self.event(at, Body::LineBack { line, away_ms });
            }
            FromLine::MeterSilent {
                meter,
                since,
                cause,
            } => {
                let meter = self.meter_name(meter);
                self.event(
                    now,
                    Body::MeterSilent {
                        meter,
                        since,
                        cause,
                    },
                );
            }
            FromLine::MeterBack { meter, at, away_ms } => {
                let meter = self.meter_name(meter);
                self.event(at, Body::MeterBack { meter, away_ms });
            }
            FromLine::Counters { line, counters } => self.line_state(line, &counters, now),
        }
    }

    /// Makes rows of every interval that has ended at `now`.
    pub fn due(&mut self, now: Timestamp) {
        for n in 0..self.intervals.len() {
            if let Some(arrival) = self.intervals[n].due(now) {
                self.row(n, &arrival);
            }
        }
    }

    /// The next moment at which something may be due.
    pub fn next_due(&self, now: Timestamp) -> Timestamp {
        self.intervals
            .iter()
            .map(|i| i.end_of(now))
            .min()
            .unwrap_or_else(|| now.plus_ms(1_000))
    }

    /// Enters an event of the daemon's own.
    pub fn event(&mut self, at: Timestamp, body: Body) {
        self.batch.events.push(NewEvent {
            at,
            entered: at,
            by: DAEMON.to_owned(),
            body,
        });
    }

    /// Hands over what has come together, if anything has.
    pub fn take_batch(&mut self) -> Option<Batch> {
        let nothing = self.batch == Batch::default();
        (!nothing).then(|| std::mem::take(&mut self.batch))
    }

    fn take_sample(&mut self, sample: &Sample, at: Timestamp) {
        let site = Arc::clone(&self.site);
        for (n, point) in site.points.iter().enumerate() {
            let figure = |signal: SignalRef| {
                let of_this = signal.meter == sample.meter;
                of_this
                    .then(|| sample.figures.get(signal.signal).copied().flatten())
                    .flatten()
            };
            if let Some(mv) = figure(point.signal) {
                let closed = self.intervals[n].add_mv(at, plain(mv));
                self.close(n, closed);
            }
            let temperature = match point.temperature {
                Temperature::Signal { signal, .. } => figure(signal).map(plain),
                Temperature::Resistance { signal, .. } => figure(signal).map(resistance),
                Temperature::Fixed(_) => None,
            };
            if let Some(temperature) = temperature {
                let closed = self.intervals[n].add_temperature(at, temperature);
                self.close(n, closed);
            }
        }
    }

    fn close(&mut self, n: usize, closed: Option<Arrival>) {
        if let Some(arrival) = closed {
            self.row(n, &arrival);
        }
    }

    fn row(&mut self, n: usize, arrival: &Arrival) {
        if let Some(Step { before, after }) = self.step.take() {
            // The writer puts the number of the first row beside it.
            self.event(
                after,
                Body::ClockStep {
                    before,
                    after,
                    seq: 0,
                },
            );
        }
        let reading = read(&self.site.points[n], &self.standing, arrival);
        self.batch.rows.push((self.ids[n], reading));
    }

    /// Only the newest state of a line is handed over.
    fn line_state(&mut self, line: usize, counters: &Counters, at: Timestamp) {
        let report = LineReport::new(&self.site, counters);
        let line = self.line_name(line);
        // Counts and texts: nothing in them that JSON cannot say.
        let Ok(body) = serde_json::to_string(&report) else {
            return;
        };
        self.batch.lines.retain(|older| older.line != line);
        self.batch.lines.push(LineState { line, at, body });
    }

    fn line_name(&self, line: usize) -> String {
        self.site
            .lines
            .get(line)
            .map_or_else(|| format!("line {line}"), |l| l.name.clone())
    }

    fn meter_name(&self, meter: usize) -> String {
        self.site
            .meters
            .get(meter)
            .map_or_else(|| format!("meter {meter}"), |m| m.name.clone())
    }
}

fn plain(figure: sample::Figure) -> Figure {
    match figure {
        sample::Figure::Number(x) => Figure::Number(x),
        sample::Figure::OverRange => Figure::OverRange,
    }
}

fn resistance(figure: sample::Figure) -> Figure {
    match figure {
        sample::Figure::Number(x) => Figure::Resistance(x),
        sample::Figure::OverRange => Figure::OverRange,
    }
}
