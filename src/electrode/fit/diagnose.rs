//! # The verdict on a line, and what is behind a bad one
//!
//! The diagnoses look for the one mistake at the bench that makes the line a good one again: bottles swapped, the meter's sign reversed,
//! one bottle holding another buffer, one reading off. They give reasons; the limits alone give the verdict, except that bottles known to
//! be swapped are always rejected.

use super::{Fit, Limits, PRIOR_SLOPE, k_of, residuals, solve, temp_of};
use crate::electrode::buffers::{BufferKind, buffer_at};
use crate::electrode::history::{ElectrodeLine, StandardReading, Verdict};

/// How far a reading may be from another buffer's value and still be explained by that bottle, pH (ours: technical buffers of one
/// name differ by 0.135, 7.00 and 6.865).
const BOTTLE_MATCH_PH: f64 = 0.15;

/// What is known before the readings: where a healthy line lies and how far it strays.
struct Expected<'a> {
    ph_iso: f64,
    before: Option<&'a ElectrodeLine>,
    limits: &'a Limits,
}

impl Expected<'_> {
    /// Whether a line could be that of a probe in use, its residuals in pH included.
    fn is_sane(&self, line: &ElectrodeLine, readings: &[StandardReading]) -> bool {
        let [low, high] = self.limits.slope_warn;
        line.slope >= low
            && line.slope <= high
            && line.offset_mv.abs() <= self.limits.offset_warn_mv
            && worst(line, readings, self.ph_iso)
                .is_none_or(|(_, off)| off.abs() <= self.limits.residual_accept_ph)
    }

    /// Squared distance from the expected line in typical strays (ours): 0.02 and 10 mV from the calibration before, or
    /// 0.03 and 15 mV from [`PRIOR_SLOPE`] and 0 mV without one.
    fn distance2(&self, line: &ElectrodeLine) -> f64 {
        let (slope, stray_slope, offset, stray_offset) = match self.before {
            Some(before) => (before.slope, 0.02, before.offset_mv, 10.0),
            None => (PRIOR_SLOPE.0, PRIOR_SLOPE.1, 0.0, 15.0),
        };
        ((line.slope - slope) / stray_slope).powi(2)
            + ((line.offset_mv - offset) / stray_offset).powi(2)
    }
}

/// The reading farthest from the line and how much too high it reads, pH.
fn worst(line: &ElectrodeLine, readings: &[StandardReading], ph_iso: f64) -> Option<(usize, f64)> {
    residuals(readings, ph_iso, line)
        .iter()
        .zip(readings)
        .map(|(mv, reading)| -mv / (line.slope * k_of(reading)))
        .enumerate()
        .max_by(|a, b| a.1.abs().total_cmp(&b.1.abs()))
}

pub(super) fn judge(
    fit: &mut Fit,
    readings: &[StandardReading],
    ph_iso: f64,
    before: Option<&ElectrodeLine>,
    limits: &Limits,
) {
    let expected = Expected {
        ph_iso,
        before,
        limits,
    };
    judge_temperatures(fit, readings, limits);
    let swapped = swapped_bottles(readings, &expected);
    if fit.line.slope <= 0.0 {
        judge_reversed(fit, swapped, readings, &expected);
        return;
    }
    let residual = worst(&fit.line, readings, ph_iso);
    let off_line = residual.is_some_and(|(_, off)| off.abs() > limits.residual_accept_ph);
    let good = |within: [f64; 2], slope: f64| slope >= within[0] && slope <= within[1];
    let odd_slope = !good(limits.slope_accept, fit.line.slope);
    if (off_line || odd_slope)
        && let Some(swapped) = swapped
    {
        worse(fit, Verdict::Rejected, swapped);
        return;
    }
    // One odd reading bends the whole line, so slope and offset would only mislead.
    if let Some((_, off)) = residual
        && off.abs() > limits.residual_warn_ph
        && let Some(odd) = odd_reading(readings, &expected)
    {
        worse(fit, Verdict::Rejected, odd);
        return;
    }
    judge_slope(fit, limits);
    judge_offset(
        fit,
        limits.offset_accept_mv,
        limits.offset_warn_mv,
        "renew or clean the reference, take fresh buffers and calibrate again",
    );
    if let (true, Some((worst, off))) = (off_line, residual) {
        let verdict = if off.abs() > limits.residual_warn_ph {
            Verdict::Rejected
        } else {
            Verdict::AcceptedWithWarning
        };
        worse(
            fit,
            verdict,
            format!(
                "`{}` reads {:.2} pH {} by this line: read it again in fresh buffer",
                readings[worst].name,
                off.abs(),
                if off > 0.0 { "high" } else { "low" }
            ),
        );
    } else if odd_slope
        && readings.len() == 2
        && let Some(hint) = other_bottle(readings, &expected)
    {
        worse(fit, Verdict::AcceptedWithWarning, hint);
    }
}

pub(super) fn judge_one_point(fit: &mut Fit, before: Option<&ElectrodeLine>, limits: &Limits) {
    if before.is_none() {
        worse(
            fit,
            Verdict::AcceptedWithWarning,
            format!(
                "one buffer gives no slope and there is no calibration before: {} ± {} is assumed; read a second buffer",
                PRIOR_SLOPE.0,
                2.0 * PRIOR_SLOPE.1
            ),
        );
    }
    judge_offset(
        fit,
        limits.offset_accept_mv,
        limits.offset_warn_mv,
        "make sure of the bottle, then renew or clean the reference and calibrate in two buffers",
    );
}

pub(super) fn worse(fit: &mut Fit, verdict: Verdict, reason: String) {
    fit.verdict = fit.verdict.max(verdict);
    fit.reasons.push(reason);
}

fn judge_temperatures(fit: &mut Fit, readings: &[StandardReading], limits: &Limits) {
    let by_temp = |a: &&StandardReading, b: &&StandardReading| a.temp_c.total_cmp(&b.temp_c);
    let (Some(cold), Some(warm)) = (
        readings.iter().min_by(by_temp),
        readings.iter().max_by(by_temp),
    ) else {
        return;
    };
    let difference = warm.temp_c - cold.temp_c;
    if difference > limits.temp_difference_warn_c {
        worse(
            fit,
            Verdict::AcceptedWithWarning,
            format!(
                "`{}` and `{}` are {difference:.1} °C apart in temperature: bring the buffers within {} °C of each other and of the liquid",
                cold.name, warm.name, limits.temp_difference_warn_c
            ),
        );
    }
}

pub(super) fn judge_offset(fit: &mut Fit, accept_mv: f64, warn_mv: f64, to_do: &str) {
    let offset = fit.line.offset_mv;
    let (verdict, beyond) = if offset.abs() > warn_mv {
        (Verdict::Rejected, warn_mv)
    } else if offset.abs() > accept_mv {
        (Verdict::AcceptedWithWarning, accept_mv)
    } else {
        return;
    };
    worse(
        fit,
        verdict,
        format!("offset {offset:.1} mV is beyond ±{beyond} mV: {to_do}"),
    );
}

/// Only for slopes above 0.
fn judge_slope(fit: &mut Fit, limits: &Limits) {
    let slope = fit.line.slope;
    let below =
        "clean the glass, take fresh buffers and calibrate again; if it stays, replace the probe";
    let above =
        "make sure of the bottles and of the temperatures, then calibrate again in fresh buffers";
    let hardly = "the glass hardly answers: look for a crack, a wet plug or a shorted cable, and replace the probe";
    let ([accept_low, accept_high], [warn_low, warn_high]) =
        (limits.slope_accept, limits.slope_warn);
    let (verdict, text) = if slope < 0.3 {
        (
            Verdict::Rejected,
            format!("slope {slope:.3} is below {warn_low}: {hardly}"),
        )
    } else if slope < warn_low {
        (
            Verdict::Rejected,
            format!("slope {slope:.3} is below {warn_low}: {below}"),
        )
    } else if slope > warn_high {
        (
            Verdict::Rejected,
            format!("slope {slope:.3} is above {warn_high}: {above}"),
        )
    } else if slope < accept_low {
        (
            Verdict::AcceptedWithWarning,
            format!("slope {slope:.3} is below {accept_low}: {below}"),
        )
    } else if slope > accept_high {
        (
            Verdict::AcceptedWithWarning,
            format!("slope {slope:.3} is above {accept_high}: {above}"),
        )
    } else {
        return;
    };
    worse(fit, verdict, text);
}

/// A slope that is not above 0: bottles swapped, or the meter's sign reversed.
fn judge_reversed(
    fit: &mut Fit,
    swapped: Option<String>,
    readings: &[StandardReading],
    expected: &Expected<'_>,
) {
    let mirrored: Vec<StandardReading> = readings
        .iter()
        .map(|r| StandardReading {
            mv: -r.mv,
            ..r.clone()
        })
        .collect();
    let sign = expected.is_sane(&solve(&mirrored, expected.ph_iso).line, &mirrored);
    let slope = fit.line.slope;
    let set = "the meter shows the opposite sign: set `scale = -1.0` on its mV signal";
    // A calibration before with the right sign speaks against a reversed meter.
    let reason = match swapped {
        Some(swapped) if expected.before.is_some() || !sign => {
            format!("slope {slope:.3} is not above 0: {swapped}")
        }
        Some(swapped) => format!(
            "slope {slope:.3} is not above 0: {swapped}; or, if the bottles are right, {set}"
        ),
        None if sign => format!("slope {slope:.3} is not above 0: {set}"),
        None => format!(
            "slope {slope:.3} is not above 0 and no order of these buffers makes it right: make sure of the bottles; if they are right, {set}"
        ),
    };
    worse(fit, Verdict::Rejected, reason);
}

/// The reading's bottle holding another value, brought to the reading's temperature.
fn with_value_of(reading: &StandardReading, other: &StandardReading) -> StandardReading {
    StandardReading {
        name: other.name.clone(),
        value: other.value + other.value_per_c * (reading.temp_c - other.temp_c),
        u_value: other.u_value,
        value_per_c: other.value_per_c,
        ..reading.clone()
    }
}

/// Whether the same bottles in another order make a good line, and which. The only order that can is the one in which the potential falls
/// as the pH rises.
fn swapped_bottles(readings: &[StandardReading], expected: &Expected<'_>) -> Option<String> {
    let mut by_mv: Vec<usize> = (0..readings.len()).collect();
    by_mv.sort_by(|a, b| readings[*b].mv.total_cmp(&readings[*a].mv));
    let mut by_value: Vec<usize> = (0..readings.len()).collect();
    by_value.sort_by(|a, b| readings[*a].value.total_cmp(&readings[*b].value));
    let mut pairs: Vec<(usize, usize)> = by_mv.into_iter().zip(by_value).collect();
    pairs.sort_unstable();
    let moved: Vec<String> = pairs
        .iter()
        .filter(|(is, reads)| {
            (readings[*is].value - readings[*reads].value).abs() > BOTTLE_MATCH_PH
        })
        .map(|(is, reads)| {
            format!(
                "`{}` reads as `{}`",
                readings[*is].name, readings[*reads].name
            )
        })
        .collect();
    let ordered: Vec<StandardReading> = pairs
        .iter()
        .map(|(is, reads)| with_value_of(&readings[*is], &readings[*reads]))
        .collect();
    let line = solve(&ordered, expected.ph_iso).line;
    (!moved.is_empty() && expected.is_sane(&line, &ordered)).then(|| {
        format!(
            "the bottles are swapped, {}: enter them in the right order",
            moved.join(" and ")
        )
    })
}

/// Every buffer that could be in the bottle of reading `i` by mistake, at its temperature.
fn other_buffers(readings: &[StandardReading], i: usize) -> Vec<StandardReading> {
    let reading = &readings[i];
    let built_in = BufferKind::ALL.iter().filter_map(|kind| {
        buffer_at(*kind, temp_of(reading))
            .ok()
            .map(|at| StandardReading {
                name: kind.name().to_owned(),
                value: at.value,
                value_per_c: at.per_c,
                ..reading.clone()
            })
    });
    let on_the_bench = readings.iter().map(|other| with_value_of(reading, other));
    on_the_bench
        .chain(built_in)
        .filter(|other| (other.value - reading.value).abs() > BOTTLE_MATCH_PH)
        .collect()
}

/// Three readings and more: the one without which the rest make a good line, and the buffer it reads like, if there is one.
fn odd_reading(readings: &[StandardReading], expected: &Expected<'_>) -> Option<String> {
    let mut best: Option<(f64, String)> = None;
    for (i, reading) in readings.iter().enumerate() {
        let rest: Vec<StandardReading> = readings[..i]
            .iter()
            .chain(&readings[i + 1..])
            .cloned()
            .collect();
        let apart =
            |end: fn(f64, f64) -> f64, from: f64| rest.iter().map(|r| r.value).fold(from, end);
        if apart(f64::max, f64::NEG_INFINITY) - apart(f64::min, f64::INFINITY)
            < expected.limits.min_distance_ph
        {
            continue;
        }
        let line = solve(&rest, expected.ph_iso).line;
        if !expected.is_sane(&line, &rest) {
            continue;
        }
        let reads = expected.ph_iso - (reading.mv - line.offset_mv) / (line.slope * k_of(reading));
        let bottle = other_buffers(readings, i)
            .into_iter()
            .map(|other| ((other.value - reads).abs(), other.name))
            .filter(|(miss, _)| *miss <= BOTTLE_MATCH_PH)
            .min_by(|a, b| a.0.total_cmp(&b.0));
        // A reading no bottle explains is taken for the likelier cause only when its rest lies 3 strays nearer (ours).
        let (badness, reason) = match bottle {
            Some((miss, name)) => (
                expected.distance2(&line) + (miss / BOTTLE_MATCH_PH).powi(2),
                format!(
                    "`{}` reads {reads:.2} by the others, as `{name}` would: read the bottle's label and take the right one",
                    reading.name
                ),
            ),
            None => (
                expected.distance2(&line) + 9.0,
                format!(
                    "`{}` reads {reads:.2} by the others, {:.2} pH {}: read it again in fresh buffer",
                    reading.name,
                    (reads - reading.value).abs(),
                    if reads > reading.value { "high" } else { "low" }
                ),
            ),
        };
        if best.as_ref().is_none_or(|(least, _)| badness < *least) {
            best = Some((badness, reason));
        }
    }
    best.map(|(_, reason)| reason)
}

/// Two readings with an odd slope: the one exchange of a bottle that makes the line a usual one.
fn other_bottle(readings: &[StandardReading], expected: &Expected<'_>) -> Option<String> {
    let mut best: Option<(f64, String)> = None;
    for (i, reading) in readings.iter().enumerate() {
        for other in other_buffers(readings, i) {
            let mut pair = readings.to_vec();
            let (name, value) = (other.name.clone(), other.value);
            pair[i] = other;
            let line = solve(&pair, expected.ph_iso).line;
            let distance2 = expected.distance2(&line);
            // Within two typical strays, or the hint is no better than what it explains.
            if !expected.is_sane(&line, &pair) || distance2 > 4.0 {
                continue;
            }
            if best.as_ref().is_none_or(|(least, _)| distance2 < *least) {
                let slope = line.slope;
                best = Some((
                    distance2,
                    format!(
                        "with `{name}` ({value:.2}) in the bottle of `{}` the slope would be {slope:.3}: read the bottle's label",
                        reading.name
                    ),
                ));
            }
        }
    }
    best.map(|(_, reason)| reason)
}
