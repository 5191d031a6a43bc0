//! # The condition of a probe, with its reasons
//!
//! in: what is known of a probe at a moment. out: one of the five words, and why, worst first.
//! Ranking when several apply: failure, function check, out of specification, maintenance required (NAMUR NE 107, from memory).

use super::flags::{Flag, Test};
use super::reading::Reading;
use super::status::Status;
use crate::electrode::history::{
    Calibration, Dated, ProbeHistory, ProbeKind, Verdict, Verification,
};
use crate::electrode::units::Timestamp;

/// What is known of a probe at a moment.
#[derive(Debug)]
pub struct Evidence<'a> {
    /// The moment.
    pub at: Timestamp,
    /// The probe.
    pub probe: &'a ProbeHistory,
    /// The newest reading of the point it sits at.
    pub reading: Option<&'a Reading>,
    /// That reading is too old to speak for now.
    pub stale: bool,
    /// Somebody has the point on hold.
    pub on_hold: bool,
    /// Largest expanded uncertainty its point can live with, in its unit.
    pub tolerance: f64,
}

/// The probe's status and the reasons for it, worst first; a good probe has none.
pub fn condition(evidence: &Evidence<'_>) -> (Status, Vec<String>) {
    let mut found = Vec::new();
    if evidence.on_hold {
        found.push((Status::FunctionCheck, "on hold".to_owned()));
    }
    if evidence.probe.point_at(evidence.at).is_some() {
        by_reading(evidence, &mut found);
    }
    by_calibration(evidence, &mut found);
    by_verification(evidence, &mut found);
    found.sort_by_key(|(status, _)| std::cmp::Reverse(*status));
    let status = found.first().map_or(Status::Good, |(status, _)| *status);
    (
        status,
        found.into_iter().map(|(_, reason)| reason).collect(),
    )
}

type Found = Vec<(Status, String)>;

fn by_reading(evidence: &Evidence<'_>, found: &mut Found) {
    let Some(reading) = evidence.reading else {
        found.push((Status::Failure, "no reading yet".to_owned()));
        return;
    };
    if evidence.stale || reading.flag == Flag::Missing {
        found.push((Status::Failure, "no reading arrives".to_owned()));
        return;
    }
    let unit = match evidence.probe.spec.kind {
        ProbeKind::Ph => "pH",
        ProbeKind::Orp => "mV",
    };
    let u = reading.u.unwrap_or_default();
    for test in reading.tests.iter() {
        let one = match test {
            Test::Temperature => (
                Status::Failure,
                "temperature missing or impossible".to_owned(),
            ),
            Test::OverRange => (Status::Failure, "the meter says over range".to_owned()),
            Test::GrossRange => (
                Status::Failure,
                "reading beyond what the electrode can give".to_owned(),
            ),
            Test::Rail => (
                Status::Failure,
                "reading at the end of the meter's scale".to_owned(),
            ),
            Test::Pinned => (Status::Failure, "reading held near the offset".to_owned()),
            Test::Uncertainty => {
                let reason = format!(
                    "uncertainty {u:.2} {unit} is above the tolerance {:.2} {unit}",
                    evidence.tolerance
                );
                (Status::MaintenanceRequired, reason)
            }
            Test::Sodium => (
                Status::OutOfSpecification,
                "above pH 12: sodium error possible".to_owned(),
            ),
            Test::Acid => (
                Status::OutOfSpecification,
                "below pH 0.5: acid error possible".to_owned(),
            ),
            Test::Span => (
                Status::OutOfSpecification,
                "reading far outside the calibrated span".to_owned(),
            ),
            Test::Gap
            | Test::Spike
            | Test::RateOfChange
            | Test::FlatLine
            | Test::Attenuated
            | Test::Mains
            | Test::TemperatureFrozen
            | Test::Pair
            | Test::Hold
            | Test::NoCalibration => continue,
        };
        found.push(one);
    }
}

fn by_calibration(evidence: &Evidence<'_>, found: &mut Found) {
    let until = |c: &&Dated<Calibration>| c.at <= evidence.at;
    let Some(in_force) = evidence.probe.calibration_at(evidence.at) else {
        found.push((
            Status::OutOfSpecification,
            "no accepted calibration".to_owned(),
        ));
        return;
    };
    let last = evidence.probe.calibrations.iter().take_while(until).last();
    if let Some(last) =
        last.filter(|last| last.fact.verdict == Verdict::Rejected && last.at >= in_force.at)
    {
        let why = last.fact.reasons.join("; ");
        found.push((
            Status::OutOfSpecification,
            format!("last calibration was rejected: {why}"),
        ));
    } else if in_force.fact.verdict == Verdict::AcceptedWithWarning {
        found.push((
            Status::MaintenanceRequired,
            in_force.fact.reasons.join("; "),
        ));
    }
}

fn by_verification(evidence: &Evidence<'_>, found: &mut Found) {
    let until = |v: &&Dated<Verification>| v.at <= evidence.at;
    let Some(last) = evidence.probe.verifications.iter().take_while(until).last() else {
        return;
    };
    let mended = evidence
        .probe
        .calibration_at(evidence.at)
        .is_some_and(|c| c.at > last.at);
    if !last.fact.passed && !mended {
        let why = last.fact.reasons.join("; ");
        found.push((
            Status::MaintenanceRequired,
            format!("last verification failed: {why}"),
        ));
    }
}
