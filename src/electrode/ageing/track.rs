//! # The track of an electrode: a bank of filters under different noise, weighted by how well each foretold the checks
//!
//! in: observations and a bank of noise sets with their shares. out: offset and slope with covariance at any moment, as known then
//! (filtered) and as known now (smoothed); what did not fit.
//! Every set runs its own filter; its weight follows its likelihood, with a small chance per day that the electrode turned to another
//! set, so that the noise adapts to a reference that begins to foul and to glass that begins to wear (dynamic model averaging: Raftery,
//! Kárný and Ettler, Technometrics 52 (2010), from memory; the smoothed weights are the forward–backward pass of the same chain).
//! Always: 1. an event further off than 4σ is held out, unless confirmed, unless several standards agree that the electrode moved, or
//! until the next event bears it out. 2. a filtered figure rests on events at or before its moment alone. 3. same input, same bits.

use super::filter::{Adjoint, Passage, Scalar, State, Update};
use super::noise::{Noise, Prior, UNDECLARED_BREAK};
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

/// The bank just after one event.
#[derive(Debug, Clone)]
struct Step {
    event: Event,
    /// Extra diffusion on the way here, per day.
    extra: [f64; 2],
    states: Vec<State>,
    updates: Vec<Vec<Update>>,
    weights: Weights,
    /// Likelihood of the event under each set, relative to the largest.
    likelihoods: Vec<f64>,
    log_likelihood: f64,
    /// How far off all standards of the event were together.
    chi2: f64,
}

/// What comes after a step, for smoothing.
#[derive(Debug, Clone)]
struct Later {
    /// Just before the step's own observations.
    before: Vec<Adjoint>,
    /// Likelihood of the step and what follows, per set.
    beta: Weights,
    /// Weights just after the step.
    weights: Weights,
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

/// An observation made ready: rows whitened, so that each is a scalar of unit variance.
struct Ready<'a> {
    observation: &'a Observation,
    scalars: Vec<Scalar>,
    log_norm: f64,
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
            let step = track.step(index, event, Outcome::Taken);
            if event.observation.rows.is_empty() || step.fits() {
                if !event.observation.rows.is_empty() {
                    held = None;
                }
                track.steps.push(step);
                continue;
            }
            let innovations = step.event.innovations;
            let jumped = track.step(index, event, Outcome::TakenAsJump);
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
                track.step(index, event, Outcome::HeldOut)
            };
            step.event.innovations = innovations;
            track.steps.push(step);
        }
        track.later = track.look_back();
        Some(track)
    }

    /// Whether the event at `index` fits once the one held out counts as a jump; if so that one's step is taken back in.
    fn bears_out(&mut self, held: usize, index: usize, ready: &[Ready<'_>]) -> Option<Step> {
        let mut other = Self {
            prior: self.prior.clone(),
            steps: self.steps[..held].to_vec(),
            as_known: Vec::new(),
            later: Vec::new(),
        };
        for (place, event) in ready.iter().enumerate().take(index).skip(held) {
            let outcome = if place == held {
                Outcome::TakenAsJump
            } else {
                Outcome::Taken
            };
            let mut step = other.step(place, event, outcome);
            step.event
                .innovations
                .clone_from(&self.steps[place].event.innovations);
            other.steps.push(step);
        }
        let step = other.step(index, &ready[index], Outcome::Taken);
        if !step.fits() {
            return None;
        }
        let replaced = self.steps.drain(held..).enumerate();
        self.as_known
            .extend(replaced.map(|(n, step)| (held + n, step)));
        self.steps.extend(other.steps.drain(held..));
        Some(step)
    }

    /// The bank just after event `index`, which follows the steps there are.
    fn step(&self, index: usize, event: &Ready<'_>, outcome: Outcome) -> Step {
        let observation = event.observation;
        let previous = self.steps[..index].last();
        let days = previous.map_or(0.0, |p| observation.at.days_since(p.event.at));
        let mut jump = observation.jump;
        let mut extra = [0.0; 2];
        if outcome == Outcome::TakenAsJump {
            // When it jumped is not known: its variance is spread over the time since the event before.
            for ((jump, extra), variance) in jump.iter_mut().zip(&mut extra).zip(UNDECLARED_BREAK) {
                if days > 0.0 {
                    *extra = variance / days;
                } else {
                    *jump += variance;
                }
            }
        }
        let foretold = self.foretold(previous, days, extra);
        let mut states: Vec<State> = foretold.0.iter().map(|s| s.broken(jump)).collect();
        let innovations = innovations(observation, &Moments::mixed(&states, &foretold.1.by_set()));
        let chi2 = chi2(event, State::mixed(&states, &foretold.1.by_set()));
        let mut updates = vec![Vec::new(); states.len()];
        let mut log_likelihoods = vec![0.0; states.len()];
        if outcome != Outcome::HeldOut {
            for ((state, updates), log) in states
                .iter_mut()
                .zip(&mut updates)
                .zip(&mut log_likelihoods)
            {
                for scalar in &event.scalars {
                    let (after, update) = state.updated(scalar);
                    // ln N(ν; 0, S)
                    *log -=
                        0.5 * (update.variance.ln() + update.innovation.powi(2) / update.variance);
                    *state = after;
                    updates.push(update);
                }
            }
        }
        let largest = log_likelihoods
            .iter()
            .copied()
            .fold(f64::NEG_INFINITY, f64::max);
        let likelihoods: Vec<f64> = log_likelihoods
            .iter()
            .map(|l| (l - largest).exp())
            .collect();
        let (weights, total) = foretold.1.times(&likelihoods).normalised();
        let log_likelihood = if outcome == Outcome::HeldOut {
            0.0
        } else {
            total.ln() + largest + event.log_norm
        };
        Step {
            event: Event {
                at: observation.at,
                event: observation.event,
                kind: observation.kind,
                innovations,
                outcome,
            },
            extra,
            states,
            updates,
            weights,
            likelihoods,
            log_likelihood,
            chi2,
        }
    }

    /// States and weights `days` after a step, or at the very start.
    fn foretold(
        &self,
        previous: Option<&Step>,
        days: f64,
        extra: [f64; 2],
    ) -> (Vec<State>, Weights) {
        let Some(previous) = previous else {
            let noises = self.prior.noises.iter();
            let states = noises.map(|n| State::start(&self.prior, n)).collect();
            return (states, Weights::start(&self.prior));
        };
        self.prior
            .advanced(&previous.states, &previous.weights, days, extra)
    }

    /// The backward pass: adjoints of every set's filter, and smoothed weights.
    fn look_back(&self) -> Vec<Later> {
        let n_sets = self.prior.noises.len();
        let mut adjoints = vec![Adjoint::NOTHING; n_sets];
        let mut beta = Weights::nothing(&self.prior);
        let mut later = Vec::with_capacity(self.steps.len());
        for (index, step) in self.steps.iter().enumerate().rev() {
            for (adjoint, updates) in adjoints.iter_mut().zip(&step.updates) {
                for update in updates.iter().rev() {
                    *adjoint = adjoint.before(update);
                }
            }
            let weights = step.weights.met(&beta).normalised().0;
            beta = beta.times(&step.likelihoods).normalised().0;
            later.push(Later {
                before: adjoints.clone(),
                beta: beta.clone(),
                weights,
            });
            let Some(previous) = index.checked_sub(1).map(|i| &self.steps[i]) else {
                break;
            };
            let days = step.event.at.days_since(previous.event.at);
            for (adjoint, noise) in adjoints.iter_mut().zip(&self.prior.noises) {
                *adjoint = adjoint.earlier(&Passage::new(noise, days, step.extra));
            }
            beta = beta.earlier(&self.prior, days);
        }
        later.reverse();
        later
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
        Some(self.foretold(Some(step), t.days_since(step.event.at), [0.0; 2]))
    }

    /// Every set's state at `t` with its weight, as known now; `None` before the first event.
    fn smoothed_sets(&self, t: Timestamp) -> Option<(Vec<State>, Weights)> {
        let index = self
            .steps
            .partition_point(|s| s.event.at <= t)
            .checked_sub(1)?;
        let step = &self.steps[index];
        let days = t.days_since(step.event.at);
        let Some(next) = self.steps.get(index + 1) else {
            return Some(self.foretold(Some(step), days, [0.0; 2]));
        };
        let (states, weights) = self.foretold(Some(step), days, next.extra);
        let later = &self.later[index + 1];
        let to_go = next.event.at.days_since(t);
        let states = states
            .iter()
            .zip(&later.before)
            .zip(&self.prior.noises)
            .map(|((state, before), noise)| {
                state.smoothed(&before.earlier(&Passage::new(noise, to_go, next.extra)))
            })
            .collect();
        let beta = later.beta.earlier(&self.prior, to_go);
        Some((states, weights.met(&beta).normalised().0))
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

    /// The noise it now believes in: intensities averaged over the bank by their weights after the last event.
    pub fn noise(&self) -> Noise {
        let weights = self
            .steps
            .last()
            .map_or_else(|| self.prior.shares.clone(), |s| s.weights.by_set());
        let mean = |pick: fn(&Noise) -> f64| {
            self.prior
                .noises
                .iter()
                .zip(&weights)
                .map(|(n, w)| w * pick(n))
                .sum()
        };
        Noise {
            q_offset: mean(|n| n.q_offset),
            q_drift: mean(|n| n.q_drift),
            tau_days: mean(|n| n.tau_days),
            q_slope: mean(|n| n.q_slope),
            slope_rate: mean(|n| n.slope_rate),
            q_slope_rate: mean(|n| n.q_slope_rate),
            slope_tau_days: mean(|n| n.slope_tau_days),
        }
    }
}

impl Prior {
    /// Every set's state and weight after `days` without an event.
    pub(super) fn advanced(
        &self,
        states: &[State],
        weights: &Weights,
        days: f64,
        extra: [f64; 2],
    ) -> (Vec<State>, Weights) {
        let states = self
            .noises
            .iter()
            .zip(states)
            .map(|(noise, state)| state.advanced(&Passage::new(noise, days, extra)))
            .collect();
        (states, weights.turned(self, days))
    }
}

impl Step {
    /// Whether every standard lies within 4σ and all together within the same probability.
    fn fits(&self) -> bool {
        let innovations = &self.event.innovations;
        #[expect(clippy::cast_precision_loss, reason = "a handful of standards")]
        let more = innovations.len().saturating_sub(1) as f64;
        // χ² of n figures beyond which lies what lies beyond 4σ of one (6e-5): 16, 19.3, 22.1, 24.5; straight within 0.5.
        let limit = HELD_OUT_BEYOND * HELD_OUT_BEYOND + 3.0 * more;
        self.chi2 <= limit
            && innovations
                .iter()
                .all(|i| i.sigmas().abs() <= HELD_OUT_BEYOND)
    }
}

/// Sum of the squared innovations over their variances, each foretold from the standards before it too.
fn chi2(event: &Ready<'_>, foretold: State) -> f64 {
    let mut believed = foretold;
    let mut sum = 0.0;
    for scalar in &event.scalars {
        let (after, update) = believed.updated(scalar);
        sum += update.innovation.powi(2) / update.variance;
        believed = after;
    }
    sum
}

impl Observation {
    /// Whether it could tell a moved electrode from one wrong bottle: two standards that differ.
    fn tells_a_jump(&self) -> bool {
        self.rows
            .iter()
            .any(|r| (r.h[1] - self.rows[0].h[1]).abs() > 30.0)
    }
}

impl<'a> Ready<'a> {
    /// Whitens the rows: covariance D + c·11ᵀ = L Lᵀ, rows become L⁻¹h, L⁻¹y of unit variance.
    fn new(observation: &'a Observation) -> Self {
        let rows = &observation.rows;
        let n = rows.len();
        let mut lower = vec![vec![0.0; n]; n];
        let mut scalars: Vec<Scalar> = Vec::with_capacity(n);
        let mut log_norm = 0.0;
        for i in 0..n {
            for j in 0..=i {
                let own = if i == j { rows[i].var_mv2 } else { 0.0 };
                let done: f64 = (0..j).map(|k| lower[i][k] * lower[j][k]).sum();
                let rest: f64 = own + observation.shared_var_mv2 - done;
                lower[i][j] = if i == j {
                    rest.max(f64::MIN_POSITIVE).sqrt()
                } else {
                    rest / lower[j][j]
                };
            }
            let solve = |whole: f64, part: fn(&Scalar) -> f64| {
                let done: f64 = (0..i).map(|k| lower[i][k] * part(&scalars[k])).sum();
                (whole - done) / lower[i][i]
            };
            let scalar = Scalar {
                h: [
                    solve(rows[i].h[0], |s| s.h[0]),
                    solve(rows[i].h[1], |s| s.h[1]),
                ],
                y: solve(rows[i].y_mv, |s| s.y),
            };
            scalars.push(scalar);
            log_norm -= lower[i][i].ln() + 0.5 * (2.0 * std::f64::consts::PI).ln();
        }
        Self {
            observation,
            scalars,
            log_norm,
        }
    }
}

fn innovations(observation: &Observation, foretold: &Moments) -> Vec<Innovation> {
    observation
        .rows
        .iter()
        .map(|row| Innovation {
            mv: row.y_mv - row.h[0] * foretold.offset_mv - row.h[1] * foretold.slope,
            sigma_mv: (foretold.variance_along(row.h) + row.var_mv2 + observation.shared_var_mv2)
                .sqrt(),
        })
        .collect()
}
