//! # The verdict on a line, and what is behind a bad one

use super::{Fit, Limits};
use crate::electrode::history::{ElectrodeLine, StandardReading, Verdict};

fn worse(fit: &mut Fit, verdict: Verdict, reason: String) {
    fit.verdict = fit.verdict.max(verdict);
    fit.reasons.push(reason);
}

fn judge_offset(fit: &mut Fit, accept: f64, warn: f64, to_do: &str) {
    let offset = fit.line.offset_mv;
    if offset.abs() > warn {
        worse(
            fit,
            Verdict::Rejected,
            format!("offset {offset:.1} mV is beyond ±{warn} mV: {to_do}"),
        );
    } else if offset.abs() > accept {
        worse(
            fit,
            Verdict::AcceptedWithWarning,
            format!("offset {offset:.1} mV is beyond ±{accept} mV: {to_do}"),
        );
    }
}

pub(super) fn judge_one_point(fit: &mut Fit, before: Option<&ElectrodeLine>, limits: &Limits) {
    if before.is_none() {
        worse(
            fit,
            Verdict::AcceptedWithWarning,
            format!(
                "one buffer gives no slope, and no calibration before has one: {} ± {} is assumed; read a second buffer",
                super::PRIOR_SLOPE.0,
                super::PRIOR_SLOPE.1
            ),
        );
    }
    judge_offset(
        fit,
        limits.offset_accept_mv,
        limits.offset_warn_mv,
        "clean or renew the reference, take fresh buffer and calibrate again",
    );
}

pub(super) fn judge_orp(fit: &mut Fit, _readings: &[StandardReading], limits: &Limits) {
    judge_offset(
        fit,
        limits.orp_offset_accept_mv,
        limits.orp_offset_warn_mv,
        "clean the metal, take fresh solution and check again",
    );
}

pub(super) fn judge(
    fit: &mut Fit,
    _readings: &[StandardReading],
    _ph_iso: f64,
    _before: Option<&ElectrodeLine>,
    limits: &Limits,
) {
    let slope = fit.line.slope;
    let [low, high] = limits.slope_warn;
    if slope <= 0.0 {
        worse(
            fit,
            Verdict::Rejected,
            format!(
                "slope {slope:.3} is not above 0: if the meter shows the opposite sign, set `scale = -1.0` on its signal"
            ),
        );
    } else if slope < low || slope > high {
        worse(
            fit,
            Verdict::Rejected,
            format!(
                "slope {slope:.3} is outside {low} to {high}: clean the glass, take fresh buffers and calibrate again"
            ),
        );
    } else if slope < limits.slope_accept[0] || slope > limits.slope_accept[1] {
        worse(
            fit,
            Verdict::AcceptedWithWarning,
            format!(
                "slope {slope:.3} is outside {} to {}: plan to replace the probe",
                limits.slope_accept[0], limits.slope_accept[1]
            ),
        );
    }
    judge_offset(
        fit,
        limits.offset_accept_mv,
        limits.offset_warn_mv,
        "clean or renew the reference, take fresh buffer and calibrate again",
    );
}
