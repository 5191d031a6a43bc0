//! # Millivolts to pH and ORP, with their uncertainty
//!
//! in: mV, °C, the electrode's line with its covariance, the uncertainty of what was read. out: the value with u (k = 2), and every
//! contribution to it.
//!
//! Model: `E = o + s·k(T)·(pH_iso − pH)`, so `pH = pH_iso − (E − o)/(s·k(T))`.
//! Propagation: GUM (JCGM 100:2008), equation 13, with the covariance of offset and slope; other inputs independent.
//! Always: 1. u is never negative and never NaN. 2. A value is never made with a temperature no probe can be in. 3. The slice form gives
//! the same figures as the single form.

use super::history::ElectrodeLine;
use super::slope::{HIGHEST_C, LOWEST_C, SLOPE_PER_KELVIN, nernst_slope};
use super::units::{Celsius, Millivolts, Ph};

/// Standard uncertainties (k = 1) of what a conversion takes in besides the line.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Inputs {
    /// Of the potential: noise and digit, mV.
    pub u_mv: f64,
    /// Of the temperature, °C.
    pub u_temp_c: f64,
    /// Of the residual junction potential between buffer and liquid: pH for a pH probe, mV for ORP.
    pub u_junction: f64,
}

/// A value with its expanded uncertainty.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Converted {
    /// pH, or mV.
    pub value: f64,
    /// Expanded uncertainty, k = 2, in the same unit.
    pub u: f64,
}

/// Why a potential could not be turned into a value.
#[derive(Debug, Clone, Copy, PartialEq, thiserror::Error)]
pub enum ConvertError {
    /// No electrode is in a liquid of this temperature.
    #[error("{0} is no temperature a probe can be in: {LOWEST_C} °C to {HIGHEST_C} °C")]
    Temperature(Celsius),
    /// The line cannot be inverted.
    #[error(
        "an electrode with slope {slope} and offset {offset_mv} mV cannot be read: the slope must be above 0 and both finite"
    )]
    NotALine {
        /// Slope, fraction of Nernst.
        slope: f64,
        /// Offset, mV.
        offset_mv: f64,
    },
    /// An uncertainty that is none.
    #[error("{what} of {figure} is no uncertainty: it must be finite and not below 0")]
    NotAnUncertainty {
        /// Which figure.
        what: &'static str,
        /// What it was.
        figure: f64,
    },
    /// The potential would be beyond what any meter shows.
    #[error("pH {ph} would be {mv} mV, beyond ±{} mV", Millivolts::HIGHEST)]
    Potential {
        /// The pH asked for.
        ph: f64,
        /// The potential it would give, mV.
        mv: f64,
    },
}

/// Contributions to the variance of a value, in its unit squared (k = 1). They add up to `u_c²`.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Budget {
    /// The value.
    pub value: f64,
    /// From the potential.
    pub mv: f64,
    /// From the offset of the line.
    pub offset: f64,
    /// From the slope of the line.
    pub slope: f64,
    /// From the covariance of offset and slope; may be negative.
    pub covariance: f64,
    /// From the temperature.
    pub temperature: f64,
    /// From the residual junction potential.
    pub junction: f64,
}

impl Budget {
    /// Combined variance `u_c²`, in the value's unit squared; never negative.
    pub fn variance(&self) -> f64 {
        let sum =
            self.mv + self.offset + self.slope + self.covariance + self.temperature + self.junction;
        // A covariance beyond what the two variances allow could bring the sum below zero; what is not a number is not known at all.
        if sum.is_nan() {
            f64::INFINITY
        } else {
            sum.max(0.0)
        }
    }

    /// The value with its expanded uncertainty, k = 2.
    pub fn converted(&self) -> Converted {
        Converted {
            value: self.value,
            u: 2.0 * self.variance().sqrt(),
        }
    }
}

/// pH from a potential, with its expanded uncertainty.
///
/// - **Units** mV, °C; `ph_iso` in pH; the variances of `line` at k = 1; result in pH, u at k = 2.
/// - **Range** −5 °C to 130 °C; slope above 0. Any potential: whether the electrode can have given it is judged elsewhere.
/// - **Source** the model above; GUM (JCGM 100:2008), equation 13.
///
/// # Errors
/// [`ConvertError::Temperature`] outside the range; [`ConvertError::NotALine`] for a slope that is not above 0;
/// [`ConvertError::NotAnUncertainty`] for a variance or u that is negative or not finite.
///
/// ```
/// use halfcell::electrode::{convert::{Inputs, to_ph}, history::ElectrodeLine, units::{Celsius, Millivolts}};
/// let ideal = ElectrodeLine { offset_mv: 0.0, slope: 1.0, var_offset_mv2: 0.09, var_slope: 1e-5, cov_mv: 0.0 };
/// let inputs = Inputs { u_mv: 0.3, u_temp_c: 0.2, u_junction: 0.01 };
/// let ph = to_ph(Millivolts::new(-177.48).unwrap(), Celsius::STANDARD, &ideal, 7.0, &inputs).unwrap();
/// assert!((ph.value - 10.000).abs() < 0.0005);
/// ```
pub fn to_ph(
    mv: Millivolts,
    t: Celsius,
    line: &ElectrodeLine,
    ph_iso: f64,
    inputs: &Inputs,
) -> Result<Converted, ConvertError> {
    ph_budget(mv, t, line, ph_iso, inputs).map(|budget| budget.converted())
}

/// pH from a potential, with every contribution to its uncertainty. Units, range and source as [`to_ph`].
///
/// # Errors
/// As [`to_ph`].
pub fn ph_budget(
    mv: Millivolts,
    t: Celsius,
    line: &ElectrodeLine,
    ph_iso: f64,
    inputs: &Inputs,
) -> Result<Budget, ConvertError> {
    check_line(line)?;
    check_uncertainties(line, inputs)?;
    check_temperature(t)?;
    let t_k = t.to_kelvin().k();
    let inverse = 1.0 / (line.slope * nernst_slope(t).mv_per_ph());
    // d = (E − o)/(s·k) = pH_iso − pH
    let d = (mv.mv() - line.offset_mv) * inverse;
    let per_slope = d / line.slope;
    Ok(Budget {
        value: ph_iso - d,
        // ∂pH/∂E = −1/(s·k)
        mv: (inverse * inputs.u_mv).powi(2),
        // ∂pH/∂o = 1/(s·k)
        offset: inverse * inverse * line.var_offset_mv2,
        // ∂pH/∂s = (E − o)/(s²·k)
        slope: per_slope * per_slope * line.var_slope,
        covariance: 2.0 * inverse * per_slope * line.cov_mv,
        // ∂pH/∂T = (E − o)/(s·k·T), as k ∝ T
        temperature: (d / t_k * inputs.u_temp_c).powi(2),
        junction: inputs.u_junction * inputs.u_junction,
    })
}

/// pH of a whole slice: row i of `out` from rows i of `mv` and `t`; rows beyond the shortest slice are left alone.
///
/// The same figures as [`to_ph`] to the last few bits, at 100 million rows a second and more on one core (`benches/convert.rs`).
///
/// # Errors
/// As [`to_ph`], for the first temperature outside the range; then `out` is untouched.
pub fn to_ph_slice(
    mv: &[Millivolts],
    t: &[Celsius],
    line: &ElectrodeLine,
    (ph_iso, inputs): (f64, &Inputs),
    out: &mut [Converted],
) -> Result<(), ConvertError> {
    check_line(line)?;
    check_uncertainties(line, inputs)?;
    t.iter().try_for_each(|t| check_temperature(*t))?;
    // Constants of the whole slice, so that a row costs one division and one root.
    let per_k = 1.0 / (line.slope * SLOPE_PER_KELVIN);
    let var_e = inputs.u_mv * inputs.u_mv + line.var_offset_mv2;
    let rel_s = line.var_slope / (line.slope * line.slope);
    let cov = 2.0 * line.cov_mv / line.slope;
    let var_t = inputs.u_temp_c * inputs.u_temp_c;
    let var_j = inputs.u_junction * inputs.u_junction;
    for ((mv, t), out) in mv.iter().zip(t).zip(out) {
        let per_t = 1.0 / t.to_kelvin().k();
        let g = per_k * per_t;
        let d = (mv.mv() - line.offset_mv) * g;
        let variance = g * (g * var_e + d * cov) + d * d * (rel_s + per_t * per_t * var_t) + var_j;
        *out = Converted {
            value: ph_iso - d,
            u: 2.0 * variance.max(0.0).sqrt(),
        };
    }
    Ok(())
}

/// The potential an electrode gives at a pH: the inverse of [`to_ph`].
///
/// # Errors
/// As [`to_ph`], and [`ConvertError::Potential`] beyond what [`Millivolts`] holds.
pub fn to_mv(
    ph: Ph,
    t: Celsius,
    line: &ElectrodeLine,
    ph_iso: f64,
) -> Result<Millivolts, ConvertError> {
    check_line(line)?;
    check_temperature(t)?;
    // E = o + s·k(T)·(pH_iso − pH)
    let mv = line.offset_mv + line.slope * nernst_slope(t).mv_per_ph() * (ph_iso - ph.ph());
    Millivolts::new(mv).map_err(|_| ConvertError::Potential { ph: ph.ph(), mv })
}

/// ORP from a potential: E minus the offset found in a check solution, in mV against the probe's own reference, u at k = 2.
///
/// No temperature enters: the slope of an unknown couple is unknown (Standard Methods 2580, from memory).
pub fn to_orp(mv: Millivolts, line: &ElectrodeLine, inputs: &Inputs) -> Converted {
    orp_budget(mv, line, inputs).converted()
}

/// ORP from a potential, with every contribution to its uncertainty, mV².
pub fn orp_budget(mv: Millivolts, line: &ElectrodeLine, inputs: &Inputs) -> Budget {
    Budget {
        value: mv.mv() - line.offset_mv,
        mv: inputs.u_mv * inputs.u_mv,
        offset: line.var_offset_mv2,
        slope: 0.0,
        covariance: 0.0,
        temperature: 0.0,
        junction: inputs.u_junction * inputs.u_junction,
    }
}

fn check_line(line: &ElectrodeLine) -> Result<(), ConvertError> {
    if line.slope > 0.0 && line.slope.is_finite() && line.offset_mv.is_finite() {
        Ok(())
    } else {
        Err(ConvertError::NotALine {
            slope: line.slope,
            offset_mv: line.offset_mv,
        })
    }
}

fn check_uncertainties(line: &ElectrodeLine, inputs: &Inputs) -> Result<(), ConvertError> {
    let figures = [
        ("variance of the offset", line.var_offset_mv2),
        ("variance of the slope", line.var_slope),
        ("covariance", line.cov_mv.abs()),
        ("u of the potential", inputs.u_mv),
        ("u of the temperature", inputs.u_temp_c),
        ("u of the junction", inputs.u_junction),
    ];
    match figures
        .into_iter()
        .find(|(_, figure)| !(figure.is_finite() && *figure >= 0.0))
    {
        None => Ok(()),
        Some((what, figure)) => Err(ConvertError::NotAnUncertainty { what, figure }),
    }
}

fn check_temperature(t: Celsius) -> Result<(), ConvertError> {
    if t.c() >= LOWEST_C && t.c() <= HIGHEST_C {
        Ok(())
    } else {
        Err(ConvertError::Temperature(t))
    }
}
