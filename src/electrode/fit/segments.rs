//! # Bracketing: between the two buffers around the sample

use super::{FitError, Limits, check, solve};
use crate::electrode::history::{ElectrodeLine, StandardReading};

/// The line through two neighbouring buffers.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Segment {
    /// The two buffers' pH, the lower first.
    pub span: [f64; 2],
    /// The line through the two readings, with its covariance.
    pub line: ElectrodeLine,
}

/// Lines between neighbouring buffers, in rising order of pH: for each sample that of the two buffers that bracket it
/// (Buck et al., Pure Appl. Chem. 74 (2002) 2169, section on bracketing, from memory). Buffers closer than the limit to the one before
/// are passed over.
///
/// # Errors
/// [`FitError`] when a figure cannot be used or fewer than two buffers are far enough apart.
pub fn segments(
    readings: &[StandardReading],
    ph_iso: f64,
    limits: &Limits,
) -> Result<Vec<Segment>, FitError> {
    check(readings, limits)?;
    let mut sorted: Vec<&StandardReading> = readings.iter().collect();
    sorted.sort_by(|a, b| a.value.total_cmp(&b.value).then(a.mv.total_cmp(&b.mv)));
    let mut found = Vec::new();
    let mut from = sorted[0];
    for next in &sorted[1..] {
        if next.value - from.value >= limits.min_distance_ph {
            let pair = [from.clone(), (*next).clone()];
            found.push(Segment {
                span: [from.value, next.value],
                line: solve(&pair, ph_iso).line,
            });
            from = next;
        }
    }
    if found.is_empty() {
        let last = sorted[sorted.len() - 1];
        return Err(FitError::BuffersTooClose {
            first: from.name.clone(),
            second: last.name.clone(),
            apart: last.value - from.value,
            limit: limits.min_distance_ph,
        });
    }
    Ok(found)
}

/// The segment for a sample of about `ph`: the one that brackets it, else the nearest; `None` only of no segments.
pub fn segment_for(segments: &[Segment], ph: f64) -> Option<&Segment> {
    segments
        .iter()
        .find(|s| ph <= s.span[1])
        .or(segments.last())
}
