//! # The published proration: a record corrected linearly between two visits, and its rating
//!
//! in: what a technician found at a visit (fouling, drift in buffers). out: corrected values with their rating.
//! Source: Wagner, Boulger, Oblinger and Smith, USGS Techniques and Methods 1-D3 (2006), from memory; that the rating uses the sum of the
//! absolute corrections is found in the USGS text on data-quality ratings. Both errors are signed so that they are added to the record.

use crate::electrode::history::ElectrodeLine;
use crate::electrode::named::named;
use crate::electrode::units::Timestamp;

named! {
    /// How good a corrected record is, from the sum of the absolute corrections in force.
    Rating, "rating" {
        /// Up to 0.2 pH.
        Excellent = "excellent",
        /// Up to 0.5 pH.
        Good = "good",
        /// Up to 0.8 pH.
        Fair = "fair",
        /// Up to 2.0 pH.
        Poor = "poor",
        /// Beyond: not to be published, corrected or not.
        ConsiderDeletion = "consider deletion",
    }
}

/// The correction criterion for pH: correct when the sum of the absolute errors is greater (TM 1-D3, from memory).
pub const CRITERION_PH: f64 = 0.2;

impl Rating {
    /// For a sum of absolute corrections in pH.
    pub fn of_ph(sum_abs: f64) -> Self {
        let sum_abs = settled(sum_abs);
        if sum_abs <= 0.2 {
            Self::Excellent
        } else if sum_abs <= 0.5 {
            Self::Good
        } else if sum_abs <= 0.8 {
            Self::Fair
        } else if sum_abs <= 2.0 {
            Self::Poor
        } else {
            Self::ConsiderDeletion
        }
    }
}

/// What cleaning changed, less what the water itself changed: `E_f = (Ma − Mb) − (Fe − Fs)`. Each pair is `[before, after]` cleaning.
pub fn fouling_error(monitor: [f64; 2], field: [f64; 2]) -> f64 {
    (monitor[1] - monitor[0]) - (field[1] - field[0])
}

/// One buffer as the cleaned sensor read it before any adjustment.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct AsFound {
    /// The buffer's value at its temperature.
    pub standard: f64,
    /// What the sensor read.
    pub reading: f64,
}

impl AsFound {
    /// What must be added to the clean sensor's reading: `E_d = Vs − Vc`.
    pub fn drift_error(&self) -> f64 {
        self.standard - self.reading
    }
}

/// A correction that grows from nothing at the last service to the whole at this one.
#[derive(Debug, Clone, PartialEq)]
pub struct Correction {
    from: Timestamp,
    until: Timestamp,
    fouling: f64,
    drift: Vec<AsFound>,
}

/// A recorded value after correction.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Corrected {
    /// Part of the interval that had passed, 0 to 1.
    pub part: f64,
    /// Added for fouling.
    pub fouling: f64,
    /// Added for drift.
    pub drift: f64,
    /// The corrected value.
    pub value: f64,
    /// Its rating.
    pub rating: Rating,
}

impl Correction {
    /// `from`: the last service, left clean and calibrated; `until`: this one; without a buffer there is no drift.
    pub fn new(from: Timestamp, until: Timestamp, fouling: f64, buffers: &[AsFound]) -> Self {
        let mut drift = buffers.to_vec();
        drift.sort_by(|a, b| a.reading.total_cmp(&b.reading));
        Self {
            from,
            until,
            fouling,
            drift,
        }
    }

    /// Whether the largest `|E_f| + |E_d|` is greater than the criterion; equal is not greater, whatever binary arithmetic makes of it.
    pub fn is_needed(&self, criterion: f64) -> bool {
        let largest = self
            .drift
            .iter()
            .map(|b| b.drift_error().abs())
            .fold(0.0, f64::max);
        settled(self.fouling.abs() + largest) > criterion
    }

    /// A value recorded at `t`, corrected. Before the interval nothing is added, after it the whole.
    pub fn at(&self, t: Timestamp, recorded: f64) -> Corrected {
        let whole = self.until.days_since(self.from);
        let part = if whole > 0.0 {
            (t.days_since(self.from) / whole).clamp(0.0, 1.0)
        } else {
            1.0
        };
        let fouling = part * self.fouling;
        let drift = part * self.full_drift(recorded);
        Corrected {
            part,
            fouling,
            drift,
            value: recorded + fouling + drift,
            rating: Rating::of_ph(fouling.abs() + drift.abs()),
        }
    }

    /// `E_d` at a recorded value: straight between the buffers' readings, held outside the outermost.
    fn full_drift(&self, recorded: f64) -> f64 {
        let above = self.drift.partition_point(|b| b.reading < recorded);
        match (
            above.checked_sub(1).and_then(|i| self.drift.get(i)),
            self.drift.get(above),
        ) {
            (Some(low), Some(high)) => {
                let part = (recorded - low.reading) / (high.reading - low.reading);
                low.drift_error() + part * (high.drift_error() - low.drift_error())
            }
            (Some(one), None) | (None, Some(one)) => one.drift_error(),
            (None, None) => 0.0,
        }
    }
}

/// The same idea on the electrode: offset and slope prorated between as-left and as-found, `part` of the way, their errors independent.
pub fn prorated_line(
    as_left: &ElectrodeLine,
    as_found: &ElectrodeLine,
    part: f64,
) -> ElectrodeLine {
    let straight = |a: f64, b: f64| a + part * (b - a);
    let variance = |a: f64, b: f64| (1.0 - part).powi(2) * a + part * part * b;
    ElectrodeLine {
        offset_mv: straight(as_left.offset_mv, as_found.offset_mv),
        slope: straight(as_left.slope, as_found.slope),
        var_offset_mv2: variance(as_left.var_offset_mv2, as_found.var_offset_mv2),
        var_slope: variance(as_left.var_slope, as_found.var_slope),
        cov_mv: variance(as_left.cov_mv, as_found.cov_mv),
    }
}

/// Rounded to 1e-9 of the unit, so that 0.08 + 0.12 is 0.20.
fn settled(figure: f64) -> f64 {
    (figure * 1e9).round() / 1e9
}
