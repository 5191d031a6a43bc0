//! # The track of an electrode: a bank of filters under different noise, weighted by how well each foretold the checks
//!
//! in: observations and a bank of noise sets with their shares. out: offset and slope with covariance at any moment, as known then
//! (filtered) and as known now (smoothed); what did not fit.
//! Every set runs its own filter; its weight follows its likelihood, with a small chance per day that the electrode turned to another
//! set, so that the noise adapts to a reference that begins to foul and to glass that begins to wear (dynamic model averaging: Raftery,
//! Kárný and Ettler, Technometrics 52 (2010), from memory; the smoothed weights are the forward–backward pass of the same chain).
//! Always: 1. an event further off than 4σ is held out, unless confirmed, unless several standards agree that the electrode moved, or
//! until the next event bears it out. 2. a filtered figure rests on events at or before its moment alone. 3. same input, same bits.

use super::bank::{Later, Ready, Step, look_back};
use super::filter::State;
use super::noise::{Noise, Prior};
use super::observation::{Kind, Observation, in_order};
use super::segment::{Moments, Segment};
use super::weights::Weights;
use crate::electrode::history::EventId;
use crate::electrode::units::Timestamp;

/// Beyond this many σ an innovation is held out.
pub const HELD_OUT_BEYOND: f64 = 4.0;

/// How far one standard lay from what was foretold.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Innovation {
    /// Observed minus foretold, mV.
    pub mv: f64,
    /// Its standard deviation as foretold, mV.
    pub sigma_mv: f64,
}

impl Innovation {
    /// In standard deviations, with sign.
    pub fn sigmas(&self) -> f64 {
        self.mv / self.sigma_mv
    }
}

/// What became of an event.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Outcome {
    /// It counts.
    Taken,
    /// It counts, and the electrode is taken to have jumped since the event before.
    TakenAsJump,
    /// It does not count until it is confirmed or borne out.
    HeldOut,
}

/// One event as the track saw it.
#[derive(Debug, Clone, PartialEq)]
pub struct Event {
    /// When.
    pub at: Timestamp,
    /// The ledger's number.
    pub event: EventId,
    /// What it was.
    pub kind: Kind,
    /// One per standard.
    pub innovations: Vec<Innovation>,
    /// What became of it.
    pub outcome: Outcome,
}

/// An electrode through time.
#[derive(Debug, Clone)]
pub struct Track {
    prior: Prior,
    steps: Vec<Step>,
    /// Steps as they were known until a later event bore out one held out.
    as_known: Vec<(usize, Step)>,
    later: Vec<Later>,
}

impl Track {
    /// Runs the bank over all observations, in whatever order they come; `None` without any that reads a standard.
    pub fn run(observations: &[Observation], prior: &Prior) -> Option<Self> {
        let mut observations = observations.to_vec();
        in_order(&mut observations);
        let first = observations.iter().position(|o| !o.rows.is_empty())?;
        let ready: Vec<Ready<'_>> = observations[first..].iter().map(Ready::new).collect();
        let mut track = Self {
            prior: prior.clone(),
            steps: Vec::with_capacity(ready.len()),
            as_known: Vec::new(),
            later: Vec::new(),
        };
        let mut held: Option<usize> = None;
        for (index, event) in ready.iter().enumerate() {
            let step = track.step(event, Outcome::Taken);
            if event.observation.rows.is_empty() || step.fits() {
                if !event.observation.rows.is_empty() {
                    held = None;
                }
                track.steps.push(step);
                continue;
            }
            let innovations = step.event.innovations;
            let jumped = Step::jumped(prior, track.steps.last(), event);
            let mut step = if event.observation.confirmed
                || (event.observation.tells_a_jump() && jumped.fits())
            {
                held = None;
                jumped
            } else if let Some(step) = held.and_then(|held| track.bears_out(held, index, &ready)) {
                held = None;
                step
            } else {
                held = Some(index);
                track.step(event, Outcome::HeldOut)
            };
            step.event.innovations = innovations;
            track.steps.push(step);
        }
        track.later = look_back(prior, &track.steps);
        track.steps.iter_mut().for_each(Step::settle);
        Some(track)
    }

    /// Whether the event at `index` fits once the one held out counts as a jump; if so that one's step is taken back in.
    fn bears_out(&mut self, held: usize, index: usize, ready: &[Ready<'_>]) -> Option<Step> {
        let before = held.checked_sub(1).map(|place| &self.steps[place]);
        let mut redone: Vec<Step> = Vec::with_capacity(index - held);
        for (place, event) in ready.iter().enumerate().take(index).skip(held) {
            let previous = redone.last().or(before);
            let mut step = if place == held {
                Step::jumped(&self.prior, previous, event)
            } else {
                Step::new(&self.prior, previous, event, Outcome::Taken)
            };
            step.event
                .innovations
                .clone_from(&self.steps[place].event.innovations);
            redone.push(step);
        }
        let step = Step::new(&self.prior, redone.last(), &ready[index], Outcome::Taken);
        if !step.fits() {
            return None;
        }
        let replaced = self.steps.drain(held..).enumerate();
        self.as_known
            .extend(replaced.map(|(n, step)| (held + n, step)));
        self.steps.extend(redone);
        Some(step)
    }

    /// The bank after an event that follows the steps there are.
    fn step(&self, event: &Ready<'_>, outcome: Outcome) -> Step {
        Step::new(&self.prior, self.steps.last(), event, outcome)
    }

    /// The last step at or before `t`, as known then.
    fn known_at(&self, t: Timestamp) -> Option<(usize, &Step)> {
        let index = self
            .steps
            .partition_point(|s| s.event.at <= t)
            .checked_sub(1)?;
        // What a later event put right was not known while that event was still to come.
        let step = self
            .as_known
            .iter()
            .filter(|(place, _)| *place == index)
            .map(|(_, step)| step)
            .next_back()
            .unwrap_or(&self.steps[index]);
        Some((index, step))
    }

    /// Every set's state at `t` with its weight, as known then; `None` before the first event.
    pub(super) fn filtered_sets(&self, t: Timestamp) -> Option<(Vec<State>, Weights)> {
        let (_, step) = self.known_at(t)?;
        Some(step.later(&self.prior, t.days_since(step.event.at)))
    }

    /// Every set's state at `t` with its weight, as known now; `None` before the first event.
    fn smoothed_sets(&self, t: Timestamp) -> Option<(Vec<State>, Weights)> {
        let index = self
            .steps
            .partition_point(|s| s.event.at <= t)
            .checked_sub(1)?;
        let step = &self.steps[index];
        let days = t.days_since(step.event.at);
        let (Some(next), Some(later)) = (self.steps.get(index + 1), self.later.get(index + 1))
        else {
            return Some(step.later(&self.prior, days));
        };
        let to_go = next.event.at.days_since(t);
        Some(step.smoothed(&self.prior, (next, later), days, to_go))
    }

    /// Offset, drift, slope and rate at `t`, resting on events at or before it; `None` before the first.
    pub fn filtered_at(&self, t: Timestamp) -> Option<State> {
        let (states, weights) = self.filtered_sets(t)?;
        Some(State::mixed(&states, &weights.by_set()))
    }

    /// The same, resting on all events.
    pub fn smoothed_at(&self, t: Timestamp) -> Option<State> {
        let (states, weights) = self.smoothed_sets(t)?;
        Some(State::mixed(&states, &weights.by_set()))
    }

    /// The stretch around `t` on which offset and slope as known then may be read off with a few operations; `None` before the first event.
    pub fn filtered_segment(&self, t: Timestamp) -> Option<Segment> {
        self.segment(t, |t| self.filtered_sets(t))
    }

    /// The same, as known now.
    pub fn smoothed_segment(&self, t: Timestamp) -> Option<Segment> {
        self.segment(t, |t| self.smoothed_sets(t))
    }

    fn segment(
        &self,
        t: Timestamp,
        sets: impl Fn(Timestamp) -> Option<(Vec<State>, Weights)>,
    ) -> Option<Segment> {
        let index = self.steps.partition_point(|s| s.event.at <= t);
        let after = self.steps.get(index.checked_sub(1)?)?.event.at;
        let next = self.steps.get(index).map(|s| s.event.at);
        let (from, until) = Segment::around(t, after, next);
        let moments = |t: Timestamp| {
            sets(t).map(|(states, weights)| Moments::mixed(&states, &weights.by_set()))
        };
        // The end is taken a moment before, on this side of the next event.
        Some(Segment::between(
            from,
            moments(from)?,
            until,
            moments(until.plus_ms(-1))?,
        ))
    }

    /// Every event in order of time, with how far off it was and what became of it.
    pub fn events(&self) -> impl Iterator<Item = &Event> {
        self.steps.iter().map(|s| &s.event)
    }

    /// Events with standards that count.
    pub fn n_events(&self) -> usize {
        self.events()
            .filter(|s| !s.innovations.is_empty() && s.outcome != Outcome::HeldOut)
            .count()
    }

    /// When the last event at or before `t` was, which may be a service.
    pub fn last_until(&self, t: Timestamp) -> Option<Timestamp> {
        self.known_at(t).map(|(_, step)| step.event.at)
    }

    /// Logarithm of the marginal likelihood of all events that count.
    pub fn log_likelihood(&self) -> f64 {
        self.steps.iter().map(|s| s.log_likelihood).sum()
    }

    /// The bank it was run under.
    pub fn prior(&self) -> &Prior {
        &self.prior
    }

    /// Share of each set over the electrode's life so far, each event weighing alike.
    pub(super) fn shares(&self) -> Vec<f64> {
        let mut shares = vec![0.0; self.prior.noises.len()];
        for later in &self.later {
            for (share, weight) in shares.iter_mut().zip(later.weights.by_set()) {
                *share += weight;
            }
        }
        let total: f64 = shares.iter().sum();
        shares.iter().map(|s| s / total).collect()
    }

    /// The noise it now believes in: over the bank by the weights after the last event, intensities averaged by their square roots so that
    /// an unlikely wild set does not speak for all.
    pub fn noise(&self) -> Noise {
        let weights = self
            .steps
            .last()
            .map_or_else(|| self.prior.shares.clone(), |s| s.weights.by_set());
        let mean = |pick: fn(&Noise) -> f64| -> f64 {
            self.prior
                .noises
                .iter()
                .zip(&weights)
                .map(|(n, w)| w * pick(n))
                .sum()
        };
        Noise {
            q_offset: mean(|n| n.q_offset.sqrt()).powi(2),
            q_drift: mean(|n| n.q_drift.sqrt()).powi(2),
            tau_days: mean(|n| n.tau_days),
            q_slope: mean(|n| n.q_slope.sqrt()).powi(2),
            slope_rate: mean(|n| n.slope_rate),
            q_slope_rate: mean(|n| n.q_slope_rate.sqrt()).powi(2),
            slope_tau_days: mean(|n| n.slope_tau_days),
        }
    }
}

impl Observation {
    /// Whether it could tell a moved electrode from one wrong bottle: two standards that differ.
    fn tells_a_jump(&self) -> bool {
        self.rows
            .iter()
            .any(|r| (r.h[1] - self.rows[0].h[1]).abs() > 30.0)
    }
}
