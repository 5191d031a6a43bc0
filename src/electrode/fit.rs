//! # Calibration: readings in buffers to offset and slope with their covariance
//!
//! in: settled readings in buffers or check solutions, the calibration before, limits. out: the line, its residuals, a verdict with reasons;
//! or why no line can be drawn.
//!
//! Model: `E = o + s·k(T)·(pH_iso − pH)`, weighted least squares with effective variance, so that errors of the buffer's value and of the
//! temperature count beside those of the reading.
//! Always: 1. the result does not depend on the order of the readings. 2. Readings exactly on a line give that line. 3. What is outside
//! the limits is rejected with a reason that says what to do, never silently kept.
//! Not here: values of buffers by temperature (`buffers`), whether a bottle is past its date, whether a reading had settled (`bench`).

mod diagnose;
mod segments;

pub use segments::{Segment, segment_for, segments};

use super::history::{ElectrodeLine, StandardReading, Verdict};
use super::slope::nernst_slope;
use super::units::Celsius;

/// What a calibration is held against. The defaults are common practice without a source unless said otherwise.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Limits {
    /// Slope, fraction of Nernst, accepted within.
    pub slope_accept: [f64; 2],
    /// Slope accepted with a warning within; beyond it is rejected.
    pub slope_warn: [f64; 2],
    /// Offset accepted up to, mV either side of 0.
    pub offset_accept_mv: f64,
    /// Offset accepted with a warning up to, mV; beyond it is rejected.
    pub offset_warn_mv: f64,
    /// Least distance between the lowest and the highest buffer, pH.
    pub min_distance_ph: f64,
    /// Difference of temperature among the buffers from which to warn, °C.
    pub temp_difference_warn_c: f64,
    /// Residual accepted up to, pH (EPA 150.2 and 9040C: ±0.05, from memory).
    pub residual_accept_ph: f64,
    /// Residual accepted with a warning up to, pH.
    pub residual_warn_ph: f64,
    /// ORP: offset accepted up to, mV (Standard Methods 2580: ±10, from memory).
    pub orp_offset_accept_mv: f64,
    /// ORP: offset accepted with a warning up to, mV (ours).
    pub orp_offset_warn_mv: f64,
    /// Potential beyond which an amplifier is saturated, mV either side of 0 (ours: glass gives at most about 700 mV).
    pub saturated_mv: f64,
}

impl Default for Limits {
    fn default() -> Self {
        Self {
            slope_accept: [0.90, 1.03],
            slope_warn: [0.85, 1.03],
            offset_accept_mv: 30.0,
            offset_warn_mv: 60.0,
            min_distance_ph: 1.0,
            temp_difference_warn_c: 10.0,
            residual_accept_ph: 0.05,
            residual_warn_ph: 0.10,
            orp_offset_accept_mv: 10.0,
            orp_offset_warn_mv: 20.0,
            saturated_mv: 2_000.0,
        }
    }
}

/// Slope and its standard uncertainty taken for a probe never calibrated in two buffers: 0.97 ± 0.03 spans the accepted window
/// 0.90–1.03 at k = 2 (ours).
pub const PRIOR_SLOPE: (f64, f64) = (0.97, 0.03);

/// Two readings differing by less than this count as the same potential, mV (ours: five times the noise of a settled reading).
const SAME_MV: f64 = 1.0;

/// A calibration as fitted.
#[derive(Debug, Clone, PartialEq)]
pub struct Fit {
    /// Offset and slope with their covariance.
    pub line: ElectrodeLine,
    /// Measured minus fitted, one per reading in the order given, mV.
    pub residuals_mv: Vec<f64>,
    /// Sum of the squared residuals over their effective variances.
    pub chi2: f64,
    /// Lowest and highest standard used, in its unit.
    pub span: [f64; 2],
    /// Accepted or not.
    pub verdict: Verdict,
    /// Why not, or what is near its limit, and what to do.
    pub reasons: Vec<String>,
}

impl Fit {
    /// The residuals in pH (ORP: leave them in mV): how much too high each buffer reads, with `k` at its own temperature.
    pub fn residuals_ph(&self, readings: &[StandardReading]) -> Vec<f64> {
        self.residuals_mv
            .iter()
            .zip(readings)
            .map(|(mv, reading)| -mv / (self.line.slope * k_of(reading)))
            .collect()
    }
}

/// Why no line can be drawn.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
pub enum FitError {
    /// Nothing was read.
    #[error("there is no reading to fit")]
    NoReadings,
    /// A figure that cannot be one.
    #[error("`{name}`: {what} {figure} cannot be used")]
    NotAFigure {
        /// The buffer.
        name: String,
        /// Which figure.
        what: &'static str,
        /// What it was.
        figure: f64,
    },
    /// The buffers do not span enough.
    #[error("buffers `{first}` and `{second}` are {apart:.2} pH apart, less than {limit} pH")]
    BuffersTooClose {
        /// The lowest.
        first: String,
        /// The highest.
        second: String,
        /// Their distance, pH.
        apart: f64,
        /// The least distance, pH.
        limit: f64,
    },
    /// A reading beyond what glass or metal can give.
    #[error("`{name}`: {mv} mV is beyond ±{limit} mV, the input is open or saturated")]
    Saturated {
        /// The buffer.
        name: String,
        /// The reading, mV.
        mv: f64,
        /// The limit, mV.
        limit: f64,
    },
    /// The same potential in different buffers.
    #[error("{mv} mV in every buffer from `{first}` to `{second}`, which are {apart:.2} pH apart")]
    NoResponse {
        /// One buffer.
        first: String,
        /// Another.
        second: String,
        /// Their distance, pH.
        apart: f64,
        /// The potential, mV.
        mv: f64,
    },
}

impl FitError {
    /// What to do about it.
    pub fn remedy(&self) -> String {
        match self {
            Self::NoReadings => "take a reading in a buffer; two buffers give offset and slope".to_owned(),
            Self::NotAFigure { name, what, .. } => format!("enter the {what} of `{name}` again"),
            Self::BuffersTooClose { limit, .. } => format!(
                "take buffers at least {limit} pH apart that bracket the liquid, or one of them alone to set the offset"
            ),
            Self::Saturated { .. } => "check plug, cable and wetting of the probe, then read the buffer again".to_owned(),
            Self::NoResponse { .. } => {
                "make sure that the bottles differ; then look for broken glass, a wet plug or a shorted cable, and replace the probe".to_owned()
            }
        }
    }
}

/// Fits a pH electrode's line to readings in buffers.
///
/// - **One reading** gives the offset alone; slope and its variance are carried over from `before`, or are [`PRIOR_SLOPE`] with a warning.
/// - **Two and more** give both. For three and more the covariance is multiplied by max(1, χ²/(n−2)).
/// - **Units** as in [`StandardReading`]; `ph_iso` in pH. Result in mV, fraction of Nernst, k = 1.
/// - **Source** weighted least squares with effective variance (York and Deming's practice for errors in x):
///   `σ_i² = u_E² + (s·k_i)²·u_pH² + (s·∂x_i/∂T)²·u_T²`, `∂x/∂T = x/T − k·∂pH/∂T`, iterated until s stands still. Checked against
///   figures computed elsewhere (`tests/published/calibration.rs`).
///
/// A line outside the limits is no error: it comes back with [`Verdict::Rejected`] and the cause in `reasons`.
///
/// # Errors
/// [`FitError`] when no line can be drawn.
pub fn fit(
    readings: &[StandardReading],
    ph_iso: f64,
    before: Option<&ElectrodeLine>,
    limits: &Limits,
) -> Result<Fit, FitError> {
    check(readings, limits)?;
    let (Some(low), Some(high)) = (
        readings.iter().min_by(|a, b| a.value.total_cmp(&b.value)),
        readings.iter().max_by(|a, b| a.value.total_cmp(&b.value)),
    ) else {
        return Err(FitError::NoReadings);
    };
    let span = [low.value, high.value];
    if let [reading] = readings {
        return Ok(one_point(reading, ph_iso, before, limits));
    }
    let apart = high.value - low.value;
    if apart < limits.min_distance_ph {
        return Err(FitError::BuffersTooClose {
            first: low.name.clone(),
            second: high.name.clone(),
            apart,
            limit: limits.min_distance_ph,
        });
    }
    if readings.iter().all(|r| (r.mv - low.mv).abs() < SAME_MV) {
        return Err(FitError::NoResponse {
            first: low.name.clone(),
            second: high.name.clone(),
            apart,
            mv: low.mv,
        });
    }
    let solved = solve(readings, ph_iso);
    let mut fit = Fit {
        line: solved.line,
        residuals_mv: residuals(readings, ph_iso, &solved.line),
        chi2: solved.chi2,
        span,
        verdict: Verdict::Accepted,
        reasons: Vec::new(),
    };
    diagnose::judge(&mut fit, readings, ph_iso, before, limits);
    Ok(fit)
}

/// Fits the offset of an ORP probe to readings in check solutions: measured minus the solution's value against the probe's own reference.
///
/// The slope is 1 without variance. With several solutions the offset is their weighted mean; its variance is not taken below the best
/// single one's, since the solutions share the uncertainty of the reference electrode's table, and it grows with max(1, χ²/(n−1)).
///
/// # Errors
/// [`FitError`] when there is no reading or a figure cannot be one.
pub fn fit_orp(readings: &[StandardReading], limits: &Limits) -> Result<Fit, FitError> {
    check(readings, limits)?;
    let mut points: Vec<(f64, f64)> = readings
        .iter()
        .map(|r| {
            let var =
                r.u_mv * r.u_mv + r.u_value * r.u_value + (r.value_per_c * r.u_temp_c).powi(2);
            (r.mv - r.value, var.max(LEAST_VARIANCE_MV2))
        })
        .collect();
    points.sort_by(|a, b| a.0.total_cmp(&b.0).then(a.1.total_cmp(&b.1)));
    let weight: f64 = points.iter().map(|(_, var)| 1.0 / var).sum();
    let offset_mv = points.iter().map(|(y, var)| y / var).sum::<f64>() / weight;
    let chi2: f64 = points
        .iter()
        .map(|(y, var)| (y - offset_mv).powi(2) / var)
        .sum();
    let best = points
        .iter()
        .map(|(_, var)| *var)
        .fold(f64::INFINITY, f64::min);
    let freedom = count(readings.len().saturating_sub(1)).max(1.0);
    let mut fit = Fit {
        line: ElectrodeLine {
            offset_mv,
            slope: 1.0,
            var_offset_mv2: best * (chi2 / freedom).max(1.0),
            var_slope: 0.0,
            cov_mv: 0.0,
        },
        residuals_mv: readings
            .iter()
            .map(|r| r.mv - r.value - offset_mv)
            .collect(),
        chi2,
        span: [
            readings
                .iter()
                .map(|r| r.value)
                .fold(f64::INFINITY, f64::min),
            readings
                .iter()
                .map(|r| r.value)
                .fold(f64::NEG_INFINITY, f64::max),
        ],
        verdict: Verdict::Accepted,
        reasons: Vec::new(),
    };
    diagnose::judge_orp(&mut fit, readings, limits);
    Ok(fit)
}

/// Effective variances are not taken below this, mV²: figures entered without uncertainty weigh alike.
const LEAST_VARIANCE_MV2: f64 = 1e-12;

fn check(readings: &[StandardReading], limits: &Limits) -> Result<(), FitError> {
    if readings.is_empty() {
        return Err(FitError::NoReadings);
    }
    for r in readings {
        let not = |what, figure| FitError::NotAFigure {
            name: r.name.clone(),
            what,
            figure,
        };
        for (what, figure) in [
            ("value", r.value),
            ("temperature coefficient", r.value_per_c),
            ("reading in mV", r.mv),
        ] {
            if !figure.is_finite() {
                return Err(not(what, figure));
            }
        }
        for (what, u) in [
            ("u of the value", r.u_value),
            ("u of the reading", r.u_mv),
            ("u of the temperature", r.u_temp_c),
        ] {
            if !u.is_finite() || u < 0.0 {
                return Err(not(what, u));
            }
        }
        if super::temperature::judge(temp_of(r)).is_err() || !r.temp_c.is_finite() {
            return Err(not("temperature", r.temp_c));
        }
        if r.mv.abs() > limits.saturated_mv {
            return Err(FitError::Saturated {
                name: r.name.clone(),
                mv: r.mv,
                limit: limits.saturated_mv,
            });
        }
    }
    Ok(())
}

/// The temperature of a reading; one that is none becomes one that no probe can be in.
fn temp_of(r: &StandardReading) -> Celsius {
    Celsius::new(r.temp_c).unwrap_or(Celsius::ABSOLUTE_ZERO)
}

fn k_of(r: &StandardReading) -> f64 {
    nernst_slope(temp_of(r)).mv_per_ph()
}

/// `x = k(T)·(pH_iso − pH)`, mV.
fn x_of(r: &StandardReading, ph_iso: f64) -> f64 {
    k_of(r) * (ph_iso - r.value)
}

/// Effective variance of a reading at slope `s`, mV².
fn variance_of(r: &StandardReading, ph_iso: f64, s: f64) -> f64 {
    let k = k_of(r);
    // ∂x/∂T = (k/T)·(pH_iso − pH) − k·∂pH/∂T
    let dx_dt = x_of(r, ph_iso) / temp_of(r).to_kelvin().k() - k * r.value_per_c;
    let var = r.u_mv * r.u_mv + (s * k * r.u_value).powi(2) + (s * dx_dt * r.u_temp_c).powi(2);
    var.max(LEAST_VARIANCE_MV2)
}

fn residuals(readings: &[StandardReading], ph_iso: f64, line: &ElectrodeLine) -> Vec<f64> {
    readings
        .iter()
        .map(|r| r.mv - (line.offset_mv + line.slope * x_of(r, ph_iso)))
        .collect()
}

struct Solved {
    line: ElectrodeLine,
    chi2: f64,
}

/// Weighted least squares over two and more readings that do not all share one x.
fn solve(readings: &[StandardReading], ph_iso: f64) -> Solved {
    // One order for the sums, whatever the order of the readings.
    let mut sorted: Vec<&StandardReading> = readings.iter().collect();
    sorted.sort_by(|a, b| {
        x_of(a, ph_iso)
            .total_cmp(&x_of(b, ph_iso))
            .then(a.mv.total_cmp(&b.mv))
            .then(a.u_mv.total_cmp(&b.u_mv))
            .then(a.u_value.total_cmp(&b.u_value))
            .then(a.u_temp_c.total_cmp(&b.u_temp_c))
            .then(a.value_per_c.total_cmp(&b.value_per_c))
    });
    let mut s = 1.0;
    let mut pass = one_pass(&sorted, ph_iso, s);
    for _ in 0..50 {
        let moved = (pass.line.slope - s).abs();
        s = pass.line.slope;
        pass = one_pass(&sorted, ph_iso, s);
        if moved < 1e-14 {
            break;
        }
    }
    if readings.len() > 2 {
        let grow = (pass.chi2 / count(readings.len() - 2)).max(1.0);
        pass.line.var_offset_mv2 *= grow;
        pass.line.var_slope *= grow;
        pass.line.cov_mv *= grow;
    }
    pass
}

/// One least squares with the effective variances at slope `s`.
fn one_pass(readings: &[&StandardReading], ph_iso: f64, s: f64) -> Solved {
    let points: Vec<(f64, f64, f64)> = readings
        .iter()
        .map(|r| (x_of(r, ph_iso), r.mv, 1.0 / variance_of(r, ph_iso, s)))
        .collect();
    let weight: f64 = points.iter().map(|(_, _, w)| w).sum();
    let x_mean = points.iter().map(|(x, _, w)| w * x).sum::<f64>() / weight;
    let y_mean = points.iter().map(|(_, y, w)| w * y).sum::<f64>() / weight;
    let sxx: f64 = points
        .iter()
        .map(|(x, _, w)| w * (x - x_mean).powi(2))
        .sum();
    let sxy: f64 = points
        .iter()
        .map(|(x, y, w)| w * (x - x_mean) * (y - y_mean))
        .sum();
    let slope = sxy / sxx;
    let offset_mv = y_mean - slope * x_mean;
    Solved {
        line: ElectrodeLine {
            offset_mv,
            slope,
            var_offset_mv2: 1.0 / weight + x_mean * x_mean / sxx,
            var_slope: 1.0 / sxx,
            cov_mv: -x_mean / sxx,
        },
        chi2: points
            .iter()
            .map(|(x, y, w)| w * (y - offset_mv - slope * x).powi(2))
            .sum(),
    }
}

/// Offset from one reading, slope carried over.
fn one_point(
    reading: &StandardReading,
    ph_iso: f64,
    before: Option<&ElectrodeLine>,
    limits: &Limits,
) -> Fit {
    let (slope, var_slope) = before.map_or((PRIOR_SLOPE.0, PRIOR_SLOPE.1.powi(2)), |line| {
        (line.slope, line.var_slope)
    });
    let x = x_of(reading, ph_iso);
    let mut fit = Fit {
        line: ElectrodeLine {
            // o = E − s·x
            offset_mv: reading.mv - slope * x,
            slope,
            var_offset_mv2: variance_of(reading, ph_iso, slope) + x * x * var_slope,
            var_slope,
            cov_mv: -x * var_slope,
        },
        residuals_mv: vec![0.0],
        chi2: 0.0,
        span: [reading.value; 2],
        verdict: Verdict::Accepted,
        reasons: Vec::new(),
    };
    diagnose::judge_one_point(&mut fit, before, limits);
    fit
}

#[expect(
    clippy::cast_precision_loss,
    reason = "a count of readings is far below 2^53"
)]
const fn count(n: usize) -> f64 {
    n as f64
}
