//! # The offset of an ORP probe

use super::diagnose::{judge_offset, worse};
use super::{Fit, FitError, LEAST_VARIANCE_MV2, Limits, check, count};
use crate::electrode::history::{ElectrodeLine, StandardReading, Verdict};

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
    judge(&mut fit, readings, limits);
    Ok(fit)
}

fn judge(fit: &mut Fit, readings: &[StandardReading], limits: &Limits) {
    judge_offset(
        fit,
        limits.orp_offset_accept_mv,
        limits.orp_offset_warn_mv,
        "clean the metal, renew the reference, take fresh solution and check again",
    );
    let by_value = |a: &&StandardReading, b: &&StandardReading| a.value.total_cmp(&b.value);
    let (Some(low), Some(high)) = (
        readings.iter().min_by(by_value),
        readings.iter().max_by(by_value),
    ) else {
        return;
    };
    // The span between two solutions does not depend on the reference, so a short one is the metal's, the insulation's or a solution's.
    let short = (high.value - low.value) - (high.mv - low.mv);
    if short.abs() > limits.orp_offset_accept_mv {
        worse(
            fit,
            Verdict::AcceptedWithWarning,
            format!(
                "from `{}` to `{}` the probe moves {:.0} mV instead of {:.0} mV: {}",
                low.name,
                high.name,
                high.mv - low.mv,
                high.value - low.value,
                if short > 0.0 {
                    "clean the metal, look for a leak at the plug, then take fresh solutions"
                } else {
                    "take fresh solutions and check again"
                }
            ),
        );
    }
}
