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

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    const INPUTS: Inputs = Inputs {
        u_mv: 0.3,
        u_temp_c: 0.2,
        u_junction: 0.01,
    };

    const IDEAL: ElectrodeLine = ElectrodeLine {
        offset_mv: 0.0,
        slope: 1.0,
        var_offset_mv2: 0.04,
        var_slope: 4e-6,
        cov_mv: 0.0,
    };

    fn mv(figure: f64) -> Millivolts {
        Millivolts::new(figure).unwrap()
    }

    fn celsius(figure: f64) -> Celsius {
        Celsius::new(figure).unwrap()
    }

    #[test]
    fn minus_177_48_mv_at_25_degrees_is_ph_10() {
        // By hand: 177.48/59.15935 = 3.00003.
        let ph = to_ph(mv(-177.48), celsius(25.0), &IDEAL, 7.0, &INPUTS).unwrap();
        assert!((ph.value - 10.000).abs() < 0.0005, "{ph:?}");
    }

    #[test]
    fn the_budget_holds_every_contribution() {
        let line = ElectrodeLine {
            offset_mv: 10.0,
            slope: 0.95,
            var_offset_mv2: 0.36,
            var_slope: 2.5e-5,
            cov_mv: -1e-3,
        };
        let budget = ph_budget(mv(-158.6), celsius(25.0), &line, 7.0, &INPUTS).unwrap();
        // By hand: s·k = 56.201382 mV; d = −168.6/56.201382 = −2.999927; 1/(s·k) = 0.0177932; d/s = −3.157818.
        for (what, got, want) in [
            ("value", budget.value, 9.999_927),
            ("mV", budget.mv, 2.849_4e-5),
            ("offset", budget.offset, 1.139_76e-4),
            ("slope", budget.slope, 2.492_95e-4),
            ("covariance", budget.covariance, 1.123_75e-4),
            ("temperature", budget.temperature, 4.049_6e-6),
            ("junction", budget.junction, 1e-4),
        ] {
            assert!(
                (got / want - 1.0).abs() < 5e-5,
                "{what}: got {got}, want {want}"
            );
        }
        let sum = 2.849_4e-5 + 1.139_76e-4 + 2.492_95e-4 + 1.123_75e-4 + 4.049_6e-6 + 1e-4;
        assert!((budget.variance() / sum - 1.0).abs() < 5e-5);
        assert!((budget.converted().u / (2.0 * sum.sqrt()) - 1.0).abs() < 5e-5);
    }

    #[test]
    fn the_temperature_lever_is_that_of_the_absolute_temperature() {
        // Source: practice sheet, section 3 (computed): 1 °C wrong costs 0.34 % of (pH − pH_iso), 0.01 at pH 4 and 10, nothing at 7.
        for (at, cost) in [(4.0, 0.0101), (7.0, 0.0), (10.0, 0.0101)] {
            let e = to_mv(Ph::new(at).unwrap(), celsius(25.0), &IDEAL, 7.0).unwrap();
            let inputs = Inputs {
                u_mv: 0.0,
                u_temp_c: 1.0,
                u_junction: 0.0,
            };
            let budget = ph_budget(e, celsius(25.0), &IDEAL, 7.0, &inputs).unwrap();
            assert!(
                (budget.temperature.sqrt() - cost).abs() < 5e-5,
                "pH {at}: {budget:?}"
            );
        }
    }

    #[test]
    fn an_orp_is_the_reading_less_the_offset() {
        let line = ElectrodeLine {
            offset_mv: 4.0,
            var_offset_mv2: 4.0,
            ..IDEAL
        };
        let inputs = Inputs {
            u_mv: 3.0,
            u_temp_c: 5.0,
            u_junction: 6.0,
        };
        let orp = to_orp(mv(654.0), &line, &inputs);
        // 2·√(3² + 2² + 6²) = 14
        assert!(
            (orp.value - 650.0).abs() < 1e-12 && (orp.u - 14.0).abs() < 1e-12,
            "{orp:?}"
        );
        assert_eq!(orp_budget(mv(654.0), &line, &inputs).converted(), orp);
    }

    #[test]
    fn no_value_is_made_with_a_temperature_no_probe_can_be_in() {
        for (c, good) in [(-5.01, false), (-5.0, true), (130.0, true), (130.01, false)] {
            let single = to_ph(mv(0.0), celsius(c), &IDEAL, 7.0, &INPUTS);
            assert_eq!(single.is_ok(), good, "{c} °C");
            let back = to_mv(Ph::new(7.0).unwrap(), celsius(c), &IDEAL, 7.0);
            assert_eq!(back.is_ok(), good, "{c} °C");
            let mut out = [Converted {
                value: -1.0,
                u: -1.0,
            }; 2];
            let slice = to_ph_slice(
                &[mv(0.0); 2],
                &[celsius(25.0), celsius(c)],
                &IDEAL,
                (7.0, &INPUTS),
                &mut out,
            );
            assert_eq!(slice.is_ok(), good, "{c} °C");
            assert_eq!(out[0].u > 0.0, good, "an error leaves the rows alone");
        }
        let error = to_ph(mv(0.0), celsius(131.0), &IDEAL, 7.0, &INPUTS).unwrap_err();
        assert_eq!(
            error.to_string(),
            "131 °C is no temperature a probe can be in: -5 °C to 130 °C"
        );
    }

    #[test]
    fn a_line_that_is_none_gives_no_value() {
        type Spoil = fn(&mut ElectrodeLine, &mut Inputs);
        let spoils: [(Spoil, &str); 9] = [
            (
                |l, _| l.slope = 0.0,
                "an electrode with slope 0 and offset 0 mV cannot be read: the slope must be above 0 and both finite",
            ),
            (
                |l, _| l.slope = f64::INFINITY,
                "an electrode with slope inf and offset 0 mV cannot be read: the slope must be above 0 and both finite",
            ),
            (
                |l, _| l.offset_mv = f64::NAN,
                "an electrode with slope 1 and offset NaN mV cannot be read: the slope must be above 0 and both finite",
            ),
            (
                |l, _| l.var_offset_mv2 = -1.0,
                "variance of the offset of -1 is no uncertainty: it must be finite and not below 0",
            ),
            (
                |l, _| l.var_slope = f64::NAN,
                "variance of the slope of NaN is no uncertainty: it must be finite and not below 0",
            ),
            (
                |l, _| l.cov_mv = f64::NEG_INFINITY,
                "covariance of inf is no uncertainty: it must be finite and not below 0",
            ),
            (
                |_, i| i.u_mv = -0.1,
                "u of the potential of -0.1 is no uncertainty: it must be finite and not below 0",
            ),
            (
                |_, i| i.u_temp_c = f64::NAN,
                "u of the temperature of NaN is no uncertainty: it must be finite and not below 0",
            ),
            (
                |_, i| i.u_junction = -1.0,
                "u of the junction of -1 is no uncertainty: it must be finite and not below 0",
            ),
        ];
        for (spoil, text) in spoils {
            let (mut line, mut inputs) = (IDEAL, INPUTS);
            spoil(&mut line, &mut inputs);
            let error = to_ph(mv(0.0), celsius(25.0), &line, 7.0, &inputs).unwrap_err();
            assert_eq!(error.to_string(), text);
            let mut out = [Converted { value: 0.0, u: 0.0 }];
            assert!(
                to_ph_slice(
                    &[mv(0.0)],
                    &[celsius(25.0)],
                    &line,
                    (7.0, &inputs),
                    &mut out
                )
                .is_err()
            );
        }
        let flat = ElectrodeLine {
            slope: -0.1,
            ..IDEAL
        };
        assert!(to_mv(Ph::new(7.0).unwrap(), celsius(25.0), &flat, 7.0).is_err());
        let huge = ElectrodeLine {
            slope: 1e3,
            ..IDEAL
        };
        assert!(matches!(
            to_mv(Ph::new(4.0).unwrap(), celsius(25.0), &huge, 7.0),
            Err(ConvertError::Potential { .. })
        ));
    }

    #[test]
    fn what_is_not_known_has_no_finite_u() {
        let unknown = Inputs {
            u_mv: f64::NAN,
            ..INPUTS
        };
        assert!(to_orp(mv(0.0), &IDEAL, &unknown).u.is_infinite());
    }

    #[test]
    fn a_slice_gives_what_single_readings_give() {
        let line = ElectrodeLine {
            offset_mv: -7.0,
            slope: 0.94,
            var_offset_mv2: 0.5,
            var_slope: 1e-5,
            cov_mv: -1.1e-3,
        };
        let potentials: Vec<Millivolts> = (-300..300).map(|i| mv(f64::from(i) * 1.3)).collect();
        let temps: Vec<Celsius> = (0..600)
            .map(|i| celsius(f64::from(i % 130) - 4.0))
            .collect();
        let mut out = vec![Converted { value: 0.0, u: 0.0 }; 600];
        to_ph_slice(&potentials, &temps, &line, (6.9, &INPUTS), &mut out).unwrap();
        for ((e, t), got) in potentials.iter().zip(&temps).zip(&out) {
            let want = to_ph(*e, *t, &line, 6.9, &INPUTS).unwrap();
            assert!((got.value - want.value).abs() < 1e-12, "{got:?} {want:?}");
            assert!((got.u - want.u).abs() < 1e-12, "{got:?} {want:?}");
        }
    }

    prop_compose! {
        fn any_line()(offset_mv in -60.0..60.0_f64, slope in 0.5..1.1_f64, sd_offset in 0.0..5.0_f64,
            sd_slope in 0.0..0.05_f64, correlation in -1.0..1.0_f64) -> ElectrodeLine {
            ElectrodeLine {
                offset_mv, slope,
                var_offset_mv2: sd_offset * sd_offset,
                var_slope: sd_slope * sd_slope,
                cov_mv: correlation * sd_offset * sd_slope,
            }
        }
    }

    proptest! {
        #[test]
        fn there_and_back_is_the_same_ph(line in any_line(), ph in -1.0..15.0_f64, c in -5.0..130.0_f64, ph_iso in 6.0..8.0_f64) {
            let e = to_mv(Ph::new(ph).unwrap(), celsius(c), &line, ph_iso).unwrap();
            let back = to_ph(e, celsius(c), &line, ph_iso, &INPUTS).unwrap();
            prop_assert!((back.value - ph).abs() < 1e-9, "{ph} came back as {}", back.value);
        }

        #[test]
        fn there_and_back_is_the_same_potential(line in any_line(), e in -600.0..600.0_f64, c in -5.0..130.0_f64) {
            let ph = to_ph(mv(e), celsius(c), &line, 7.0, &INPUTS).unwrap();
            // A pH beyond its own range is no input of the way back.
            if let Ok(ph) = Ph::new(ph.value) {
                let back = to_mv(ph, celsius(c), &line, 7.0).unwrap();
                prop_assert!((back.mv() - e).abs() < 1e-9, "{e} came back as {back}");
            }
        }

        #[test]
        fn ph_falls_as_the_potential_rises(line in any_line(), e in -600.0..600.0_f64, more in 0.001..100.0_f64, c in -5.0..130.0_f64) {
            let low = to_ph(mv(e), celsius(c), &line, 7.0, &INPUTS).unwrap();
            let high = to_ph(mv(e + more), celsius(c), &line, 7.0, &INPUTS).unwrap();
            prop_assert!(high.value < low.value);
        }

        #[test]
        fn u_is_a_number_and_never_below_the_junction(line in any_line(), e in -100_000.0..100_000.0_f64, c in -5.0..130.0_f64,
            u_mv in 0.0..10.0_f64, u_temp_c in 0.0..10.0_f64, u_junction in 0.0..0.1_f64) {
            let inputs = Inputs { u_mv, u_temp_c, u_junction };
            let ph = to_ph(mv(e), celsius(c), &line, 7.0, &inputs).unwrap();
            prop_assert!(ph.u.is_finite() && ph.u >= 2.0 * u_junction * (1.0 - 1e-9), "{ph:?}");
        }

        /// Outside the span u grows with the distance: the variance is a parabola of the pH whose least value lies where offset and slope
        /// are known best.
        #[test]
        fn u_grows_outside_the_span(slope in 0.85..1.05_f64, low in 1.0..6.0_f64, high in 7.0..12.0_f64, c in 0.0..100.0_f64,
            sd in 0.1..2.0_f64, step in 0.1..2.0_f64) {
            // Two readings of equal weight at x0 and x1: covariance of a straight line.
            let k = nernst_slope(celsius(c)).mv_per_ph();
            let (x0, x1) = (k * (7.0 - high), k * (7.0 - low));
            let mean = f64::midpoint(x0, x1);
            let sxx = (x1 - x0).powi(2) / 2.0;
            let line = ElectrodeLine {
                offset_mv: 0.0,
                slope,
                var_offset_mv2: sd * sd * (0.5 + mean * mean / sxx),
                var_slope: sd * sd / sxx,
                cov_mv: -sd * sd * mean / sxx,
            };
            let inputs = Inputs { u_mv: 0.3, u_temp_c: 0.0, u_junction: 0.01 };
            let u = |ph: f64| {
                let e = to_mv(Ph::new(ph).unwrap(), celsius(c), &line, 7.0).unwrap();
                to_ph(e, celsius(c), &line, 7.0, &inputs).unwrap().u
            };
            for far in 0..4 {
                let d = f64::from(far) * step;
                prop_assert!(u(high + d + step) > u(high + d));
                prop_assert!(u(low - d - step) > u(low - d));
            }
            prop_assert!(u(high + step) > u(f64::midpoint(low, high)));
        }
    }
}
