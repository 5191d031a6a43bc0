//! # Ahead: by when the electrode must be calibrated
//!
//! in: a track, the line in force, what the point can live with and its usual pH and temperature. out: calibrate-by with its earliest and
//! latest, and why. The same future is drawn every time: a fixed set of paths of the electrode under its bank of noise.

use super::bank::advanced;
use super::draws::Draws;
use super::filter::{OFFSET, Passage, SLOPE, State};
use super::noise::Prior;
use super::observation::k_mv_per_ph;
use super::segment::Moments;
use super::track::Track;
use super::weights::Weights;
use crate::electrode::history::{ElectrodeLine, ProbeKind};
use crate::electrode::units::Timestamp;

/// What a point asks of a probe.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Demands {
    /// Glass or metal.
    pub kind: ProbeKind,
    /// pH at which the potential does not depend on temperature.
    pub ph_iso: f64,
    /// Largest u (k = 2) the point can live with, in the value's unit.
    pub tolerance: f64,
    /// Slope's window, fraction of Nernst.
    pub slope: [f64; 2],
    /// Largest offset either side of 0, mV.
    pub offset_mv: f64,
    /// The liquid's usual pH; not used for ORP.
    pub usual_ph: f64,
    /// The liquid's usual temperature, °C.
    pub usual_temp_c: f64,
    /// Standard uncertainty of the residual junction potential, in the value's unit.
    pub u_junction: f64,
}

/// What comes first.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Reason {
    /// The uncertainty of the value reaches the tolerance.
    Uncertainty,
    /// The slope leaves its window.
    Slope,
    /// The offset leaves its window.
    Offset,
    /// Nothing within two years: no electrode goes longer without a check.
    Age,
}

/// When to calibrate.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct CalibrateBy {
    /// By this moment.
    pub by: Timestamp,
    /// The value's error exceeds the tolerance before this moment with probability 5 %.
    pub earliest: Timestamp,
    /// And before this one with probability 95 %.
    pub latest: Timestamp,
    /// Why.
    pub reason: Reason,
}

/// Paths drawn.
const N_PATHS: usize = 512;
/// Looked ahead at most, days.
const HORIZON_DAYS: f64 = 730.0;
/// First step, days; each next one is longer by [`STRETCH`].
const FIRST_STEP_DAYS: f64 = 0.25;
const STRETCH: f64 = 1.08;

/// Calibrate-by as known at `from`, for values made by `line`, in force since `since`; `None` before the first event.
pub fn calibrate_by(
    track: &Track,
    (line, since): (&ElectrodeLine, Timestamp),
    demands: &Demands,
    from: Timestamp,
) -> Option<CalibrateBy> {
    // Looking from the last event makes the answer the same all days until the next one.
    let start = track.last_until(from)?.max(since);
    let (states, weights) = track.filtered_sets(start)?;
    let times = steps();
    let futures = Futures::draw(
        &states,
        &weights,
        track.prior(),
        &times,
        &Error::new(line, demands),
    );
    let mut by = (HORIZON_DAYS, Reason::Age);
    let mut sooner = |days: Option<f64>, reason: Reason| {
        if let Some(days) = days.filter(|d| *d < by.0) {
            by = (days, reason);
        }
    };
    let u = |t: f64| {
        let (states, weights) = advanced(track.prior(), (&states, &weights), t, [0.0; 2]);
        Error::new(line, demands).u(&Moments::mixed(&states, &weights.by_set()))
    };
    sooner(crossing(&times, u, demands.tolerance), Reason::Uncertainty);
    sooner(first_above(&times, &futures.slope_out, 0.5), Reason::Slope);
    sooner(
        first_above(&times, &futures.offset_out, 0.5),
        Reason::Offset,
    );
    let earliest = first_above(&times, &futures.passed, 0.05).unwrap_or(HORIZON_DAYS);
    let latest = first_above(&times, &futures.passed, 0.95).unwrap_or(HORIZON_DAYS);
    Some(CalibrateBy {
        by: after(start, by.0),
        earliest: after(start, earliest.min(by.0)),
        latest: after(start, latest.max(by.0)),
        reason: by.1,
    })
}

fn after(start: Timestamp, days: f64) -> Timestamp {
    #[expect(clippy::cast_possible_truncation, reason = "at most two years in ms")]
    start.plus_ms((days * 86_400_000.0) as i64)
}

/// Moments looked at, days ahead: dense at first.
fn steps() -> Vec<f64> {
    let mut times = vec![0.0];
    let (mut t, mut step) = (0.0, FIRST_STEP_DAYS);
    while t < HORIZON_DAYS {
        t += step;
        step *= STRETCH;
        times.push(t.min(HORIZON_DAYS));
    }
    times
}

/// The error of a value made by a line, at the usual pH and temperature: linear in offset and slope.
struct Error<'a> {
    line: &'a ElectrodeLine,
    demands: &'a Demands,
    /// ∂error/∂offset and ∂error/∂slope.
    h: [f64; 2],
}

impl<'a> Error<'a> {
    fn new(line: &'a ElectrodeLine, demands: &'a Demands) -> Self {
        // value = pH_iso − (E − o_c)/(s_c·k) with E = o + s·k(pH_iso − pH)
        let h = match demands.kind {
            ProbeKind::Ph => {
                let k = k_mv_per_ph(demands.usual_temp_c);
                [
                    -1.0 / (line.slope * k),
                    -(demands.ph_iso - demands.usual_ph) / line.slope,
                ]
            }
            ProbeKind::Orp => [1.0, 0.0],
        };
        Self { line, demands, h }
    }

    /// Value minus truth when the electrode is at (offset, slope).
    fn at(&self, offset_mv: f64, slope: f64) -> f64 {
        self.h[0] * (offset_mv - self.line.offset_mv) + self.h[1] * (slope - self.line.slope)
    }

    /// u of the value when this is believed of the electrode.
    fn u(&self, believed: &Moments) -> f64 {
        let bias = self.at(believed.offset_mv, believed.slope);
        let junction = self.demands.u_junction;
        2.0 * (believed.variance_along(self.h) + bias * bias + junction * junction).sqrt()
    }
}

/// Shares of paths, per moment looked at.
struct Futures {
    /// The value's error has passed the tolerance.
    passed: Vec<f64>,
    /// The slope is outside its window.
    slope_out: Vec<f64>,
    /// The offset is outside its window.
    offset_out: Vec<f64>,
}

impl Futures {
    fn draw(
        states: &[State],
        weights: &Weights,
        prior: &Prior,
        times: &[f64],
        error: &Error<'_>,
    ) -> Self {
        let passages: Vec<Vec<Passage>> = prior
            .noises
            .iter()
            .map(|noise| {
                times
                    .windows(2)
                    .map(|w| Passage::new(noise, w[1] - w[0], [0.0; 2]))
                    .collect()
            })
            .collect();
        let mut futures = Self {
            passed: vec![0.0; times.len()],
            slope_out: vec![0.0; times.len()],
            offset_out: vec![0.0; times.len()],
        };
        let (sets, temperaments) = (weights.by_set(), weights.by_temperament());
        let mut draws = Draws::new(SEED);
        #[expect(clippy::cast_precision_loss, reason = "some hundred paths")]
        let (one, n) = (1.0 / N_PATHS as f64, N_PATHS as f64);
        for path in 0..N_PATHS {
            #[expect(clippy::cast_precision_loss, reason = "some hundred paths")]
            let mut set = pick(&sets, (path as f64 + 0.5) / n);
            let temperament = &prior.temperaments[pick(&temperaments, draws.uniform())];
            let mut x = states[set].draw(&mut draws);
            let junction = error.demands.u_junction * draws.normal();
            let mut survives = 1.0;
            let mut before = error.at(x[OFFSET], x[SLOPE]) + junction;
            for (place, _) in times.iter().enumerate() {
                if place > 0 {
                    let days = times[place] - times[place - 1];
                    if draws.uniform() < temperament.turnover(days) {
                        set = pick(&prior.shares, draws.uniform());
                    }
                    x = passages[set][place - 1].draw(&x, &mut draws);
                    let now = error.at(x[OFFSET], x[SLOPE]) + junction;
                    let noise = &prior.noises[set];
                    let spread = (error.h[0].powi(2) * noise.q_offset
                        + error.h[1].powi(2) * noise.q_slope)
                        * days;
                    survives *= 1.0 - passes(before, now, error.demands.tolerance, spread);
                    before = now;
                } else if before.abs() > error.demands.tolerance {
                    survives = 0.0;
                }
                futures.passed[place] += one * (1.0 - survives);
                let [lowest, highest] = error.demands.slope;
                if x[SLOPE] < lowest || x[SLOPE] > highest {
                    futures.slope_out[place] += one;
                }
                if x[OFFSET].abs() > error.demands.offset_mv {
                    futures.offset_out[place] += one;
                }
            }
        }
        futures
    }
}

const SEED: u64 = 0x68_61_6C_66_63_65_6C_6C;

/// Probability that a Brownian path between two errors touches ±tolerance: `exp(−2(b − x)(b − y)/σ²)` per side.
fn passes(before: f64, now: f64, tolerance: f64, spread: f64) -> f64 {
    if before.abs() >= tolerance || now.abs() >= tolerance {
        return 1.0;
    }
    if spread <= 0.0 {
        return 0.0;
    }
    let side = |b: f64| (-2.0 * (b - before) * (b - now) / spread).exp();
    (side(tolerance) + side(-tolerance)).min(1.0)
}

/// The set at which the running sum of the shares passes `level`.
fn pick(shares: &[f64], level: f64) -> usize {
    let mut sum = 0.0;
    for (place, share) in shares.iter().enumerate() {
        sum += share;
        if sum >= level {
            return place;
        }
    }
    shares.len() - 1
}

/// First time at which `f` reaches `level`, between the moments looked at by halving.
fn crossing(times: &[f64], f: impl Fn(f64) -> f64, level: f64) -> Option<f64> {
    let place = times.iter().position(|t| f(*t) > level)?;
    if place == 0 {
        return Some(times[0]);
    }
    let (mut low, mut high) = (times[place - 1], times[place]);
    for _ in 0..20 {
        let middle = 0.5 * (low + high);
        if f(middle) > level {
            high = middle;
        } else {
            low = middle;
        }
    }
    Some(high)
}

/// First time at which a share reaches `level`, straight between the moments looked at.
fn first_above(times: &[f64], shares: &[f64], level: f64) -> Option<f64> {
    let place = shares.iter().position(|s| *s >= level)?;
    if place == 0 {
        return Some(times[0]);
    }
    let (a, b) = (shares[place - 1], shares[place]);
    let part = (level - a) / (b - a);
    Some(times[place - 1] + part * (times[place] - times[place - 1]))
}
