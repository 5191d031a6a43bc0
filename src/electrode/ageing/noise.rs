//! # How restless an electrode may be: one set of noise intensities, and the bank of sets a track is run under
//!
//! Offset and slope are each an integrated Ornstein–Uhlenbeck process: a level that diffuses by itself and is carried by a rate, the
//! rate itself wandering and decaying to its mean with a time constant. Magnitudes of the ordinary sets: common practice, no source
//! (offset 1–2 mV a week and a slow trend; slope −0.2 to −1 % a month).

use crate::electrode::history::{ProbeKind, Service};

/// Noise intensities of one electrode; time in days.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Noise {
    /// Diffusion of the offset, mV²/day.
    pub q_offset: f64,
    /// Diffusion of the offset's drift, (mV/day)²/day.
    pub q_drift: f64,
    /// Time constant with which the drift decays to 0, days; above 0.
    pub tau_days: f64,
    /// Diffusion of the slope, 1/day.
    pub q_slope: f64,
    /// Mean rate of the slope, 1/day; negative for glass that wears.
    pub slope_rate: f64,
    /// Diffusion of the slope's rate about its mean, (1/day)²/day.
    pub q_slope_rate: f64,
    /// Time constant with which the slope's rate returns to its mean, days; above 0.
    pub slope_tau_days: f64,
}

impl Noise {
    /// Variance of the drift when nothing is known of it, (mV/day)²: the stationary `q·τ/2`.
    pub fn var_drift(&self) -> f64 {
        self.q_drift * self.tau_days / 2.0
    }

    /// Variance of the slope's rate about its mean when nothing is known of it, (1/day)².
    pub fn var_slope_rate(&self) -> f64 {
        self.q_slope_rate * self.slope_tau_days / 2.0
    }

    /// The ordinary set of a glass electrode.
    pub fn glass() -> Self {
        Self::glass_scaled(1.0, 0.08, 1)
    }

    /// The ordinary set of a metal electrode; its slope is 1 and stays so.
    pub fn orp() -> Self {
        Self::orp_scaled(1.0, 0.2)
    }

    /// `wander`: times the ordinary offset walk; `drift`: stationary standard deviation of the drift, mV/day; `wear` picks the slope's set.
    fn glass_scaled(wander: f64, drift: f64, wear: usize) -> Self {
        let (slope_month, rate_month, rate_sd_month) = SLOPE_SETS[wear];
        let q_offset = WALK_MV_PER_ROOT_WEEK * WALK_MV_PER_ROOT_WEEK / 7.0;
        Self {
            q_offset: q_offset * wander * wander,
            q_drift: 2.0 * drift * drift / TAU_DAYS,
            tau_days: TAU_DAYS,
            q_slope: slope_month * slope_month / MONTH,
            slope_rate: rate_month / MONTH,
            q_slope_rate: 2.0 * (rate_sd_month / MONTH).powi(2) / SLOPE_TAU_DAYS,
            slope_tau_days: SLOPE_TAU_DAYS,
        }
    }

    fn orp_scaled(wander: f64, drift: f64) -> Self {
        let glass = Self::glass_scaled(2.0 * wander, drift, 0);
        Self {
            q_slope: 0.0,
            slope_rate: 0.0,
            q_slope_rate: 0.0,
            ..glass
        }
    }
}

/// Days of a mean month.
const MONTH: f64 = 30.0;
/// Walk of an ordinary glass electrode's offset, mV per √week; with the ordinary drift 1.2 mV a week (common practice: 1–2 mV a week).
const WALK_MV_PER_ROOT_WEEK: f64 = 1.0;
/// Time constant of the offset's drift, days: a trend lasts months (common practice).
const TAU_DAYS: f64 = 90.0;
/// Time constant of the slope's rate, days.
const SLOPE_TAU_DAYS: f64 = 120.0;
/// Slope: walk per √month, mean rate per month, standard deviation of the rate per month. Quiet, ordinary, worn (common practice: −0.2 to −1 % a month; several % in hot or caustic service).
const SLOPE_SETS: [(f64, f64, f64); 3] = [
    (0.001_5, -0.004, 0.003),
    (0.005, -0.006, 0.006),
    (0.012, -0.012, 0.035),
];
/// Shares of the three slope sets before anything is known.
const SLOPE_SHARES: [f64; 3] = [0.4, 0.45, 0.15];
/// Factors on the ordinary walk of the offset, and their shares.
const WANDERS: [(f64, f64); 6] = [
    (0.3, 0.09),
    (0.55, 0.21),
    (1.0, 0.40),
    (1.8, 0.21),
    (3.3, 0.07),
    (6.0, 0.02),
];
/// Standard deviations of the offset's drift, mV/day, and their shares: steady, ordinary, runaway (a reference that fouls or is poisoned).
const DRIFTS: [(f64, f64); 3] = [(0.02, 0.40), (0.10, 0.47), (0.50, 0.13)];

/// A bank: sets of noise with the share each has before this electrode is known. [`learn`](super::learn::learn) moves the shares
/// towards what a site's electrodes of the kind have shown.
#[derive(Debug, Clone, PartialEq)]
pub struct Prior {
    /// The sets.
    pub noises: Vec<Noise>,
    /// Their shares; they sum to 1.
    pub shares: Vec<f64>,
    /// Standard deviation of the offset before the first check, mV.
    pub start_offset_sd_mv: f64,
    /// Slope before the first check.
    pub start_slope: f64,
    /// Its standard deviation.
    pub start_slope_sd: f64,
    /// How faithful electrodes are to one set.
    pub temperaments: Vec<Temperament>,
}

/// How faithful an electrode is to one set of noise.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Temperament {
    /// Share of electrodes that are so; the shares of all sum to 1.
    pub share: f64,
    /// Mean time with one set before turning to another, days; infinite for never.
    pub regime_days: f64,
}

impl Temperament {
    /// Probability of a turn in `days`.
    pub(super) fn turnover(&self, days: f64) -> f64 {
        -(-days / self.regime_days).exp_m1()
    }
}

/// Steady, as most are for life, and changeable (common practice, no source).
const TEMPERAMENTS: [Temperament; 2] = [
    Temperament {
        share: 0.6,
        regime_days: 3_000.0,
    },
    Temperament {
        share: 0.4,
        regime_days: 120.0,
    },
];

impl Prior {
    /// What practice says of a kind.
    pub fn of(kind: ProbeKind) -> Self {
        let (noises, shares): (Vec<_>, Vec<_>) = match kind {
            ProbeKind::Ph => WANDERS
                .iter()
                .flat_map(|&(wander, p)| {
                    DRIFTS.iter().map(move |&(drift, r)| (wander, drift, p * r))
                })
                .flat_map(|(wander, drift, p)| {
                    SLOPE_SHARES
                        .iter()
                        .enumerate()
                        .map(move |(wear, r)| (Noise::glass_scaled(wander, drift, wear), p * r))
                })
                .unzip(),
            ProbeKind::Orp => WANDERS
                .iter()
                .flat_map(|&(wander, p)| {
                    DRIFTS
                        .iter()
                        .map(move |&(drift, r)| (Noise::orp_scaled(wander, 2.0 * drift), p * r))
                })
                .unzip(),
        };
        Self {
            noises,
            shares,
            start_offset_sd_mv: 20.0,
            start_slope: if kind == ProbeKind::Ph { 0.98 } else { 1.0 },
            start_slope_sd: if kind == ProbeKind::Ph { 0.04 } else { 0.0 },
            temperaments: TEMPERAMENTS.to_vec(),
        }
    }

    /// One set alone: the plain filter and smoother.
    pub fn only(noise: Noise, kind: ProbeKind) -> Self {
        Self {
            noises: vec![noise],
            shares: vec![1.0],
            ..Self::of(kind)
        }
    }
}

/// Jump variance a service brings: offset mV², slope squared. Common practice, no source.
pub(super) fn service_break(service: Service) -> [f64; 2] {
    let (offset_mv, slope) = match service {
        Service::Cleaned => (5.0, 0.01),
        Service::Regelled => (10.0, 0.005),
        Service::NewCap => (15.0, 0.03),
        Service::NewCable => (1.0, 0.002),
    };
    [offset_mv * offset_mv, slope * slope]
}

/// Standard deviation of a jump granted to an electrode that moved though nobody said why: offset mV, slope. Common practice, no source.
pub(super) const UNDECLARED_BREAK: [f64; 2] = [15.0, 0.03];
