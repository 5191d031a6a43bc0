//! # The bank at one event: every set's filter moved to it, tried on it, weighted by it
//!
//! Always: 1. without an event, states and weights a while later do not depend on how often they were looked at between.

use super::filter::{Adjoint, Passage, Scalar, State, Update};
use super::noise::{Prior, UNDECLARED_BREAK};
use super::observation::Observation;
use super::segment::Moments;
use super::track::{Event, HELD_OUT_BEYOND, Innovation, Outcome};
use super::weights::Weights;

/// The bank just after one event.
#[derive(Debug, Clone)]
pub(super) struct Step {
    pub(super) event: Event,
    /// Extra diffusion on the way here, per day.
    extra: [f64; 2],
    states: Vec<State>,
    updates: Vec<Vec<Update>>,
    pub(super) weights: Weights,
    /// Likelihood of the event under each set, relative to the largest.
    likelihoods: Vec<f64>,
    pub(super) log_likelihood: f64,
    /// How far off all standards of the event were together.
    chi2: f64,
}

/// What comes after a step, for smoothing.
#[derive(Debug, Clone)]
pub(super) struct Later {
    /// Just before the step's own observations.
    before: Vec<Adjoint>,
    /// Likelihood of the step and what follows, per set.
    beta: Weights,
    /// Weights just after the step.
    pub(super) weights: Weights,
}

/// An observation made ready: rows whitened, so that each is a scalar of unit variance.
pub(super) struct Ready<'a> {
    pub(super) observation: &'a Observation,
    scalars: Vec<Scalar>,
    log_norm: f64,
}

/// One set's filter tried on an event.
struct Trial {
    state: State,
    updates: Vec<Update>,
    log_likelihood: f64,
    chi2: f64,
}

/// Sizes of jumps tried, in [`UNDECLARED_BREAK`].
const JUMP_SIZES: [f64; 2] = [0.5, 1.0];
const LARGEST_JUMP: f64 = 2.0;

impl Step {
    /// The bank just after an event that follows `previous` (`None`: the very first).
    pub(super) fn new(
        prior: &Prior,
        previous: Option<&Self>,
        event: &Ready<'_>,
        outcome: Outcome,
    ) -> Self {
        Self::after(prior, previous, event, (outcome, [0.0; 2]))
    }

    /// The same when the electrode jumped on the way: the smallest jump that makes the event fit, or the largest if none does.
    pub(super) fn jumped(prior: &Prior, previous: Option<&Self>, event: &Ready<'_>) -> Self {
        let step = |size: f64| {
            let moved = UNDECLARED_BREAK.map(|sd| (size * sd).powi(2));
            Self::after(prior, previous, event, (Outcome::TakenAsJump, moved))
        };
        let fitting = JUMP_SIZES.iter().map(|size| step(*size)).find(Self::fits);
        fitting.unwrap_or_else(|| step(LARGEST_JUMP))
    }

    fn after(
        prior: &Prior,
        previous: Option<&Self>,
        event: &Ready<'_>,
        (outcome, moved): (Outcome, [f64; 2]),
    ) -> Self {
        let observation = event.observation;
        let days = previous.map_or(0.0, |p| observation.at.days_since(p.event.at));
        let mut jump = observation.jump;
        let mut extra = [0.0; 2];
        // When it jumped is not known: the variance is spread over the time since the event before.
        for ((jump, extra), variance) in jump.iter_mut().zip(&mut extra).zip(moved) {
            if days > 0.0 {
                *extra = variance / days;
            } else {
                *jump += variance;
            }
        }
        let n_sets = prior.noises.len();
        let (mut states, foretold) = foretell(prior, previous, days, extra);
        for state in &mut states {
            *state = state.broken(jump);
        }
        let believed = foretold.by_set();
        let innovations = innovations(observation, &Moments::mixed(&states, &believed));
        let chi2 = event.try_on(State::mixed(&states, &believed)).chi2;
        let mut updates = vec![Vec::new(); n_sets];
        let mut logs = vec![0.0; n_sets];
        if outcome != Outcome::HeldOut {
            for set in 0..n_sets {
                let trial = event.try_on(states[set]);
                states[set] = trial.state;
                updates[set] = trial.updates;
                logs[set] = trial.log_likelihood;
            }
        }
        let largest = logs.iter().copied().fold(f64::NEG_INFINITY, f64::max);
        let likelihoods: Vec<f64> = logs.iter().map(|l| (l - largest).exp()).collect();
        let (weights, total) = foretold.times(&likelihoods).normalised();
        let log_likelihood = if outcome == Outcome::HeldOut {
            0.0
        } else {
            total.ln() + largest + event.log_norm
        };
        Self {
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

    /// Drops what only the backward pass needs: about 20 kB an event stay.
    pub(super) fn settle(&mut self) {
        self.updates = Vec::new();
        self.likelihoods = Vec::new();
    }

    /// Whether every standard lies within 4σ and all together within the same probability.
    pub(super) fn fits(&self) -> bool {
        let innovations = &self.event.innovations;
        // χ² of n figures beyond which lies what lies beyond 4σ of one (6e-5): 16, 19.3, 22.1, 24.5; straight within 0.5.
        let limit = HELD_OUT_BEYOND * HELD_OUT_BEYOND + 3.0 * (count(innovations.len()) - 1.0);
        self.chi2 <= limit
            && innovations
                .iter()
                .all(|i| i.sigmas().abs() <= HELD_OUT_BEYOND)
    }

    /// States and weights `days` later, nothing having happened.
    pub(super) fn later(&self, prior: &Prior, days: f64) -> (Vec<State>, Weights) {
        advanced(prior, (&self.states, &self.weights), days, [0.0; 2])
    }

    /// States and weights `days` after this step and `to_go` before the next, knowing all that follows.
    pub(super) fn smoothed(
        &self,
        prior: &Prior,
        (next, later): (&Self, &Later),
        days: f64,
        to_go: f64,
    ) -> (Vec<State>, Weights) {
        let (mut states, weights) = foretell(prior, Some(self), days, next.extra);
        for (set, state) in states.iter_mut().enumerate() {
            let passage = Passage::new(&prior.noises[set], to_go, next.extra);
            *state = state.smoothed(&later.before[set].earlier(&passage));
        }
        let beta = later.beta.earlier(prior, to_go);
        (states, weights.met(&beta).normalised().0)
    }
}

/// States and weights `days` after a step, or at the very start.
fn foretell(
    prior: &Prior,
    previous: Option<&Step>,
    days: f64,
    extra: [f64; 2],
) -> (Vec<State>, Weights) {
    let Some(previous) = previous else {
        let states = prior.noises.iter().map(|n| State::start(prior, n));
        return (states.collect(), Weights::start(prior));
    };
    advanced(prior, (&previous.states, &previous.weights), days, extra)
}

/// Every set's state and weight after `days` without an event; `extra` diffusion per day.
pub(super) fn advanced(
    prior: &Prior,
    (states, weights): (&[State], &Weights),
    days: f64,
    extra: [f64; 2],
) -> (Vec<State>, Weights) {
    let states = prior
        .noises
        .iter()
        .zip(states)
        .map(|(noise, state)| state.advanced(&Passage::new(noise, days, extra)));
    (states.collect(), weights.turned(prior, days))
}

/// The backward pass: for each step what it and all that follows say, per set.
pub(super) fn look_back(prior: &Prior, steps: &[Step]) -> Vec<Later> {
    let mut adjoints = vec![Adjoint::NOTHING; prior.noises.len()];
    let mut beta = Weights::nothing(prior);
    let mut all = Vec::with_capacity(steps.len());
    for (index, step) in steps.iter().enumerate().rev() {
        for (adjoint, updates) in adjoints.iter_mut().zip(&step.updates) {
            for update in updates.iter().rev() {
                *adjoint = adjoint.before(update);
            }
        }
        let weights = step.weights.met(&beta).normalised().0;
        beta = beta.times(&step.likelihoods).normalised().0;
        all.push(Later {
            before: adjoints.clone(),
            beta: beta.clone(),
            weights,
        });
        if let Some(previous) = index.checked_sub(1).map(|i| &steps[i]) {
            let days = step.event.at.days_since(previous.event.at);
            for (adjoint, noise) in adjoints.iter_mut().zip(&prior.noises) {
                *adjoint = adjoint.earlier(&Passage::new(noise, days, step.extra));
            }
            beta = beta.earlier(prior, days);
        }
    }
    all.reverse();
    all
}

/// Variance a row keeps at least, mV², so that readings said to be exact can still be divided by.
const LEAST_VAR_MV2: f64 = 1e-18;

impl<'a> Ready<'a> {
    /// Whitens the rows: covariance D + c·11ᵀ = L Lᵀ, rows become L⁻¹h, L⁻¹y of unit variance.
    pub(super) fn new(observation: &'a Observation) -> Self {
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
                    rest.max(LEAST_VAR_MV2).sqrt()
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
            log_norm -= lower[i][i].ln() + 0.5 * std::f64::consts::TAU.ln();
        }
        Self {
            observation,
            scalars,
            log_norm,
        }
    }

    /// A filter's state after this event, with how well it had been foretold.
    fn try_on(&self, foretold: State) -> Trial {
        let mut trial = Trial {
            state: foretold,
            updates: Vec::with_capacity(self.scalars.len()),
            log_likelihood: 0.0,
            chi2: 0.0,
        };
        for scalar in &self.scalars {
            let (after, update) = trial.state.updated(scalar);
            // ln N(ν; 0, S), the constant left to `log_norm`
            let square = update.innovation.powi(2) / update.variance;
            trial.log_likelihood -= 0.5 * (update.variance.ln() + square);
            trial.chi2 += square;
            trial.state = after;
            trial.updates.push(update);
        }
        trial
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

#[expect(clippy::cast_precision_loss, reason = "a handful of standards")]
fn count(n: usize) -> f64 {
    n as f64
}
