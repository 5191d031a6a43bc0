//! # The filter: what is known of offset, drift, slope and slope's rate at a moment, under one set of noise
//!
//! in: a state, days to pass, standards read. out: the state after. Joseph form, so covariances stay symmetric and positive.
//! DEVIATES: the slope's own rate stands in the state beside the three figures of the usual description, as the drift stands beside the
//! offset; otherwise glass that begins to wear is followed only after it has been read several times.
//! Always: 1. covariances are symmetric to the bit. 2. more noise never makes a variance smaller.
//! Source of the equations: Kalman (1960); Joseph's stabilised update and the fixed-interval smoother in Bryson and Frazier's form
//! (both in Gelb (ed.), Applied Optimal Estimation, 1974; from memory), which equals Rauch, Tung and Striebel's and needs no inverse.

use super::draws::Draws;
use super::noise::{Noise, Prior};

/// Offset mV, its drift mV/day, slope, its rate beyond the mean 1/day.
pub type Vector = [f64; 4];
/// Covariance of a [`Vector`].
pub type Matrix = [[f64; 4]; 4];

/// Places in a [`Vector`].
pub(super) const OFFSET: usize = 0;
pub(super) const DRIFT: usize = 1;
pub(super) const SLOPE: usize = 2;
pub(super) const RATE: usize = 3;

/// A Gaussian belief about an electrode at one moment.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct State {
    /// Means: offset mV, drift mV/day, slope, slope's rate beyond its mean 1/day.
    pub mean: Vector,
    /// Covariance.
    pub cov: Matrix,
}

/// One scalar observation of unit variance: `y = a·offset + b·slope + noise`.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Scalar {
    pub(super) h: [f64; 2],
    pub(super) y: f64,
}

/// What one scalar observation did, kept for the smoother.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Update {
    pub(super) h: [f64; 2],
    pub(super) gain: Vector,
    pub(super) innovation: f64,
    pub(super) variance: f64,
}

/// Smoother's adjoint: what later observations say about a state.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Adjoint {
    pub(super) lambda: Vector,
    pub(super) information: Matrix,
}

/// The passing of time: `x' = F x + drive`, with F of two blocks [1 g; 0 φ].
#[derive(Debug, Clone, Copy)]
pub(super) struct Passage {
    g: [f64; 2],
    phi: [f64; 2],
    drive: f64,
    q: [[f64; 3]; 2],
}

impl Passage {
    /// `extra`: additional diffusion of offset and slope, per day.
    pub(super) fn new(noise: &Noise, days: f64, extra: [f64; 2]) -> Self {
        let offset = wandering(days, noise.tau_days);
        let slope = wandering(days, noise.slope_tau_days);
        let block = |w: &Wandering, level: f64, rate: f64| {
            [
                level * days + rate * w.var_level,
                rate * w.cov,
                rate * w.var_rate,
            ]
        };
        Self {
            g: [offset.g, slope.g],
            phi: [offset.phi, slope.phi],
            drive: noise.slope_rate * days,
            q: [
                block(&offset, noise.q_offset + extra[0], noise.q_drift),
                block(&slope, noise.q_slope + extra[1], noise.q_slope_rate),
            ],
        }
    }

    fn forward(&self, x: &Vector) -> Vector {
        let [g0, g1] = self.g;
        let [f0, f1] = self.phi;
        [x[0] + g0 * x[1], f0 * x[1], x[2] + g1 * x[3], f1 * x[3]]
    }

    /// One electrode's state after this passage, drawn at random.
    pub(super) fn draw(&self, x: &Vector, draws: &mut Draws) -> Vector {
        let mut after = self.forward(x);
        after[SLOPE] += self.drive;
        for (block, q) in self.q.iter().enumerate() {
            // Cholesky of [a b; b c]
            let [a, b, c] = *q;
            if a > 0.0 {
                let (first, second) = (draws.normal(), draws.normal());
                after[2 * block] += a.sqrt() * first;
                after[2 * block + 1] +=
                    b / a.sqrt() * first + (c - b * b / a).max(0.0).sqrt() * second;
            }
        }
        after
    }

    /// Fᵀ x.
    fn transposed(&self, x: &Vector) -> Vector {
        let [g0, g1] = self.g;
        let [f0, f1] = self.phi;
        [x[0], g0 * x[0] + f0 * x[1], x[2], g1 * x[2] + f1 * x[3]]
    }
}

struct Wandering {
    phi: f64,
    g: f64,
    var_level: f64,
    cov: f64,
    var_rate: f64,
}

/// Exact discretisation of `l̇ = r`, `ṙ = −r/τ + white noise of unit intensity`, over `days`.
fn wandering(days: f64, tau: f64) -> Wandering {
    let x = days / tau;
    // φ = e^(−x), g = τ(1 − φ)
    let g = -tau * (-x).exp_m1();
    // Var l = τ³[x − 2(1 − e^(−x)) + ½(1 − e^(−2x))]; for small x its series, since the terms cancel.
    let var_level = if x < 0.005 {
        days.powi(3) / 3.0 * (1.0 + x * (-0.75 + x * (0.35 - x * 0.125)))
    } else {
        tau.powi(3) * (x + 2.0 * (-x).exp_m1() - 0.5 * (-2.0 * x).exp_m1())
    };
    Wandering {
        phi: (-x).exp(),
        g,
        var_level,
        cov: g * g / 2.0,
        var_rate: -tau / 2.0 * (-2.0 * x).exp_m1(),
    }
}

impl State {
    /// What is believed before the first check.
    pub(super) fn start(prior: &Prior, noise: &Noise) -> Self {
        let mut cov = [[0.0; 4]; 4];
        cov[OFFSET][OFFSET] = prior.start_offset_sd_mv * prior.start_offset_sd_mv;
        cov[DRIFT][DRIFT] = noise.var_drift();
        cov[SLOPE][SLOPE] = prior.start_slope_sd * prior.start_slope_sd;
        cov[RATE][RATE] = noise.var_slope_rate();
        Self {
            mean: [0.0, 0.0, prior.start_slope, 0.0],
            cov,
        }
    }

    /// After time has passed.
    #[must_use]
    pub(super) fn advanced(&self, passage: &Passage) -> Self {
        let mut mean = passage.forward(&self.mean);
        mean[SLOPE] += passage.drive;
        // F P Fᵀ + Q
        let mut cov = congruence(&self.cov, |x| passage.forward(x));
        for (block, q) in passage.q.iter().enumerate() {
            let at = 2 * block;
            cov[at][at] += q[0];
            cov[at][at + 1] += q[1];
            cov[at + 1][at] += q[1];
            cov[at + 1][at + 1] += q[2];
        }
        Self { mean, cov }
    }

    /// After a jump of stated variance in offset and slope.
    #[must_use]
    pub(super) fn broken(&self, jump: [f64; 2]) -> Self {
        let mut after = *self;
        after.cov[OFFSET][OFFSET] += jump[0];
        after.cov[SLOPE][SLOPE] += jump[1];
        after
    }

    /// After one scalar observation of unit variance.
    pub(super) fn updated(&self, row: &Scalar) -> (Self, Update) {
        let h = row.h;
        let ph: Vector =
            std::array::from_fn(|i| self.cov[i][OFFSET] * h[0] + self.cov[i][SLOPE] * h[1]);
        let variance = h[0] * ph[OFFSET] + h[1] * ph[SLOPE] + 1.0;
        let innovation = row.y - h[0] * self.mean[OFFSET] - h[1] * self.mean[SLOPE];
        let gain: Vector = std::array::from_fn(|i| ph[i] / variance);
        let mean = std::array::from_fn(|i| self.mean[i] + gain[i] * innovation);
        // P' = (I − K h) P (I − K h)ᵀ + K Kᵀ   (Joseph; the observation's variance is 1)
        let mut cov = congruence(&self.cov, |x| {
            let along = h[0] * x[OFFSET] + h[1] * x[SLOPE];
            std::array::from_fn(|i| x[i] - gain[i] * along)
        });
        for i in 0..4 {
            for j in 0..4 {
                cov[i][j] += gain[i] * gain[j];
            }
        }
        let update = Update {
            h,
            gain,
            innovation,
            variance,
        };
        (Self { mean, cov }, update)
    }

    /// One electrode that may be so, drawn at random.
    pub(super) fn draw(&self, draws: &mut Draws) -> Vector {
        // x = mean + L z, cov = L Lᵀ; a direction without variance stays at the mean.
        let mut lower = [[0.0; 4]; 4];
        for i in 0..4 {
            for j in 0..=i {
                let done: f64 = (0..j).map(|k| lower[i][k] * lower[j][k]).sum();
                let rest = self.cov[i][j] - done;
                lower[i][j] = if i == j {
                    rest.max(0.0).sqrt()
                } else if lower[j][j] > 0.0 {
                    rest / lower[j][j]
                } else {
                    0.0
                };
            }
        }
        let z: Vector = std::array::from_fn(|_| draws.normal());
        std::array::from_fn(|i| self.mean[i] + dot(&lower[i], &z))
    }

    /// This (filtered) state with what later observations say of it.
    #[must_use]
    pub(super) fn smoothed(&self, later: &Adjoint) -> Self {
        // x_s = x − P λ,  P_s = P − P Λ P
        let p = &self.cov;
        let mean = std::array::from_fn(|i| self.mean[i] - dot(&p[i], &later.lambda));
        let taken = congruence(&later.information, |x| {
            std::array::from_fn(|i| dot(&p[i], x))
        });
        let mut cov: Matrix =
            std::array::from_fn(|i| std::array::from_fn(|j| p[i][j] - taken[i][j]));
        for (i, row) in cov.iter_mut().enumerate() {
            row[i] = row[i].max(0.0);
        }
        Self { mean, cov }
    }
}

impl Adjoint {
    /// Nothing comes later.
    pub(super) const NOTHING: Self = Self {
        lambda: [0.0; 4],
        information: [[0.0; 4]; 4],
    };

    /// From after an observation to before it.
    #[must_use]
    pub(super) fn before(&self, update: &Update) -> Self {
        let Update {
            h,
            gain,
            innovation,
            variance,
        } = *update;
        // (I − K h)ᵀ x = x − hᵀ (K·x)
        let back = |x: &Vector| {
            let along = dot(&gain, x);
            [x[0] - h[0] * along, x[1], x[2] - h[1] * along, x[3]]
        };
        let mut lambda = back(&self.lambda);
        lambda[OFFSET] -= h[0] * innovation / variance;
        lambda[SLOPE] -= h[1] * innovation / variance;
        let mut information = congruence(&self.information, back);
        information[OFFSET][OFFSET] += h[0] * h[0] / variance;
        information[OFFSET][SLOPE] += h[0] * h[1] / variance;
        information[SLOPE][OFFSET] += h[0] * h[1] / variance;
        information[SLOPE][SLOPE] += h[1] * h[1] / variance;
        Self {
            lambda,
            information,
        }
    }

    /// From the end of a passage to its beginning.
    #[must_use]
    pub(super) fn earlier(&self, passage: &Passage) -> Self {
        Self {
            lambda: passage.transposed(&self.lambda),
            information: congruence(&self.information, |x| passage.transposed(x)),
        }
    }
}

fn dot(a: &Vector, b: &Vector) -> f64 {
    a[0] * b[0] + a[1] * b[1] + a[2] * b[2] + a[3] * b[3]
}

/// `A P Aᵀ` for symmetric P, A given by what it does to a vector; symmetric to the bit.
fn congruence(p: &Matrix, apply: impl Fn(&Vector) -> Vector) -> Matrix {
    // P is symmetric, so applying A to its rows gives (A P)ᵀ column by column.
    let half: Matrix = std::array::from_fn(|i| apply(&p[i]));
    let turned: Matrix = std::array::from_fn(|i| apply(&std::array::from_fn(|j| half[j][i])));
    std::array::from_fn(|i| std::array::from_fn(|j| 0.5 * (turned[i][j] + turned[j][i])))
}
