//! # Observations: everything that says something about an electrode's offset and slope, in one form
//!
//! in: calibrations, verifications, grab samples, a second probe in the same liquid, services. out: rows `y = offset + slope·x` with
//! their variances, and the junction term that all rows of one event share.
//! Always: 1. the order in which events were entered does not matter, only when they were so and their number.

use super::noise::service_break;
use crate::electrode::history::{
    Calibration, Dated, EventId, Grab, ProbeHistory, ProbeKind, Service, StandardReading,
    Verification,
};
use crate::electrode::slope::SLOPE_PER_KELVIN;
use crate::electrode::units::Timestamp;

/// One standard read: `mv = h[0]·offset + h[1]·slope + noise`.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Row {
    /// Factors of offset and slope.
    pub h: [f64; 2],
    /// Observed, mV.
    pub y_mv: f64,
    /// Variance of what this row alone got wrong, mV².
    pub var_mv2: f64,
}

/// What kind of event an observation is.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub enum Kind {
    /// Something was done to the probe; brings a jump and no rows.
    Service,
    /// A calibration, accepted or not.
    Calibration,
    /// A verification.
    Verification,
    /// A bench sample of the liquid.
    Grab,
    /// A second probe in the same liquid.
    Pair,
}

/// One event.
#[derive(Debug, Clone, PartialEq)]
pub struct Observation {
    /// When it was so.
    pub at: Timestamp,
    /// The ledger's number.
    pub event: EventId,
    /// What it was.
    pub kind: Kind,
    /// What was read.
    pub rows: Vec<Row>,
    /// Variance of the junction's error that all rows share, mV².
    pub shared_var_mv2: f64,
    /// Variance of a jump at this moment: offset mV², slope squared.
    pub jump: [f64; 2],
    /// Somebody has confirmed it: it counts however far off it is.
    pub confirmed: bool,
}

/// Standard uncertainty of the junction potential between a standard and the next liquid, pH (Buck et al. 2002, from memory; common practice).
const JUNCTION_PH: f64 = 0.01;
/// The same for a redox check solution, mV (common practice, no source).
const JUNCTION_ORP_MV: f64 = 1.0;
/// How well a grab sample stands for the liquid at the probe, pH (common practice, no source).
const MIXING_PH: f64 = 0.02;
/// The same for redox, mV (common practice, no source).
const MIXING_ORP_MV: f64 = 5.0;
/// Standard uncertainty of a settled signal in the liquid, mV (common practice).
const SIGNAL_MV: f64 = 0.3;

/// k(T), mV/pH.
pub(super) fn k_mv_per_ph(temp_c: f64) -> f64 {
    SLOPE_PER_KELVIN * (temp_c + 273.15)
}

/// Rows of standards: `E = offset + slope·k(T)(pH_iso − pH)`, variance `u_E² + k²·u_pH² + (∂x/∂T)²·u_T²` at slope 1.
fn rows(readings: &[StandardReading], kind: ProbeKind, ph_iso: f64) -> Vec<Row> {
    readings
        .iter()
        .map(|r| match kind {
            ProbeKind::Ph => {
                let k = k_mv_per_ph(r.temp_c);
                let away = ph_iso - r.value;
                let dx_dt = away * SLOPE_PER_KELVIN - k * r.value_per_c;
                Row {
                    h: [1.0, k * away],
                    y_mv: r.mv,
                    var_mv2: r.u_mv.powi(2)
                        + (k * r.u_value).powi(2)
                        + (dx_dt * r.u_temp_c).powi(2),
                }
            }
            ProbeKind::Orp => Row {
                h: [1.0, 0.0],
                y_mv: r.mv - r.value,
                var_mv2: r.u_mv.powi(2) + r.u_value.powi(2) + (r.value_per_c * r.u_temp_c).powi(2),
            },
        })
        .collect()
}

fn junction_var(readings: &[StandardReading], kind: ProbeKind) -> f64 {
    match kind {
        ProbeKind::Ph => readings
            .iter()
            .map(|r| (k_mv_per_ph(r.temp_c) * JUNCTION_PH).powi(2))
            .fold(0.0, f64::max),
        ProbeKind::Orp => JUNCTION_ORP_MV * JUNCTION_ORP_MV,
    }
}

/// A liquid as another instrument saw it at a moment, with the probe's own signal then.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Comparison {
    /// The probe's signal then, mV.
    pub mv: f64,
    /// Temperature then, °C.
    pub temp_c: f64,
    /// The other's value: pH, or mV against the probe's own reference.
    pub value: f64,
    /// Standard uncertainty of that value (k = 1).
    pub u_value: f64,
}

impl Observation {
    /// From a calibration.
    pub fn calibration(fact: &Dated<Calibration>, kind: ProbeKind, ph_iso: f64) -> Self {
        Self::standards(fact, Kind::Calibration, &fact.fact.readings, (kind, ph_iso))
    }

    /// From a verification.
    pub fn verification(fact: &Dated<Verification>, kind: ProbeKind, ph_iso: f64) -> Self {
        Self::standards(
            fact,
            Kind::Verification,
            &fact.fact.readings,
            (kind, ph_iso),
        )
    }

    fn standards<T>(
        fact: &Dated<T>,
        what: Kind,
        readings: &[StandardReading],
        (kind, ph_iso): (ProbeKind, f64),
    ) -> Self {
        Self {
            at: fact.at,
            event: fact.id,
            kind: what,
            rows: rows(readings, kind, ph_iso),
            shared_var_mv2: junction_var(readings, kind),
            jump: [0.0; 2],
            confirmed: false,
        }
    }

    /// From a service: the jump it may have brought.
    pub fn service(fact: &Dated<Service>) -> Self {
        Self {
            at: fact.at,
            event: fact.id,
            kind: Kind::Service,
            rows: Vec::new(),
            shared_var_mv2: 0.0,
            jump: service_break(fact.fact),
            confirmed: false,
        }
    }

    /// From a grab sample and the probe's signal at that time.
    pub fn grab(
        fact: &Dated<Grab>,
        mv: f64,
        temp_c: f64,
        (kind, ph_iso): (ProbeKind, f64),
    ) -> Self {
        let seen = Comparison {
            mv,
            temp_c,
            value: fact.fact.value,
            u_value: fact.fact.u / 2.0,
        };
        Self::seen(fact.at, (Kind::Grab, fact.id), &seen, (kind, ph_iso))
    }

    /// From a second probe in the same liquid: its value and u as its own checks alone make them. Its error does not renew itself
    /// from one comparison to the next, so `n_comparisons` made between two checks of it together weigh as one.
    pub fn pair(
        at: Timestamp,
        seen: &Comparison,
        n_comparisons: u32,
        (kind, ph_iso): (ProbeKind, f64),
    ) -> Self {
        let mut pair = Self::seen(at, (Kind::Pair, 0), seen, (kind, ph_iso));
        for row in &mut pair.rows {
            row.var_mv2 *= f64::from(n_comparisons.max(1));
        }
        pair
    }

    fn seen(
        at: Timestamp,
        (what, event): (Kind, EventId),
        seen: &Comparison,
        (kind, ph_iso): (ProbeKind, f64),
    ) -> Self {
        // E(t) = offset + slope·k(T)(pH_iso − pH): variance from the other's u, the signal's noise and mixing.
        let row = match kind {
            ProbeKind::Ph => {
                let k = k_mv_per_ph(seen.temp_c);
                Row {
                    h: [1.0, k * (ph_iso - seen.value)],
                    y_mv: seen.mv,
                    var_mv2: k * k * (seen.u_value.powi(2) + MIXING_PH * MIXING_PH)
                        + SIGNAL_MV * SIGNAL_MV,
                }
            }
            ProbeKind::Orp => Row {
                h: [1.0, 0.0],
                y_mv: seen.mv - seen.value,
                var_mv2: seen.u_value.powi(2)
                    + MIXING_ORP_MV * MIXING_ORP_MV
                    + SIGNAL_MV * SIGNAL_MV,
            },
        };
        Self {
            at,
            event,
            kind: what,
            rows: vec![row],
            shared_var_mv2: 0.0,
            jump: [0.0; 2],
            confirmed: false,
        }
    }
}

/// Everything a probe's own history says up to and including `until`: calibrations not struck out, verifications, services, and what
/// `seen` adds (grab samples and pairs, which need the signal of their moment).
pub fn observe(history: &ProbeHistory, seen: &[Observation], until: Timestamp) -> Vec<Observation> {
    let spec = &history.spec;
    let calibrations = history
        .calibrations
        .iter()
        .filter(|c| !history.struck.iter().any(|s| s.fact == c.id))
        .map(|c| Observation::calibration(c, spec.kind, spec.ph_iso));
    let verifications = history
        .verifications
        .iter()
        .map(|v| Observation::verification(v, spec.kind, spec.ph_iso));
    let services = history.services.iter().map(Observation::service);
    let mut all: Vec<Observation> = calibrations
        .chain(verifications)
        .chain(services)
        .chain(seen.iter().cloned())
        .filter(|o| o.at <= until)
        .collect();
    for observation in &mut all {
        observation.confirmed |= history
            .confirmed
            .iter()
            .any(|c| c.fact == observation.event);
    }
    in_order(&mut all);
    all
}

/// By time, then number, then kind; within that by what was read, so that entry order never shows.
pub(super) fn in_order(observations: &mut [Observation]) {
    observations.sort_by(|a, b| {
        (a.at, a.event, a.kind)
            .cmp(&(b.at, b.event, b.kind))
            .then_with(|| {
                let key = |o: &Observation| o.rows.first().map_or(0.0, |r| r.y_mv);
                key(a).total_cmp(&key(b))
            })
    });
}
