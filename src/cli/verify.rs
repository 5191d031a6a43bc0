//! # `verify`: a reading in a buffer without adjusting

use super::context::{Context, Who, put};
use super::exit::Exit;
use super::failure::Failure;
use super::figures;
use super::probe::{in_service, sits_at};
use super::standards::{self, Asked, Expired};
use super::typed::TypedBuffer;
use crate::config::site::Site;
use crate::electrode::convert::{self, Inputs};
use crate::electrode::history::{
    Book, Calibration, Dated, ElectrodeLine, ProbeHistory, ProbeKind, ProbeSpec, Stage,
    StandardReading, Tag, Verification,
};
use crate::electrode::units::{Celsius, Millivolts, Timestamp};
use crate::ledger::event::{Body, Event};
use serde_json::json;

/// Check a probe in a buffer or check solution without adjusting it
#[derive(Debug, clap::Args)]
#[command(after_help = "\
Exit code 1 when an error is beyond the point's tolerance.

Example:
  halfcell verify --probe P-1042 --stage as-found --at '2026-03-02 09:14' --by 'M. Oake' --buffer phosphate,2.1,18.5,L201")]
pub(super) struct Args {
    /// The electrode
    #[arg(long, value_name = "ID")]
    pub(super) probe: String,
    /// When in the visit
    #[arg(long, value_name = "as-found|as-left|check", default_value = "check")]
    pub(super) stage: Stage,
    /// Buffer or check solution, settled mV, °C and perhaps the lot; may be repeated
    #[arg(
        long = "buffer",
        value_name = "KIND_OR_PH,MV,TEMP_C[,LOT]",
        required = true
    )]
    pub(super) buffers: Vec<TypedBuffer>,
    #[command(flatten)]
    pub(super) who: Who,
}

pub(super) fn run(context: &Context, args: &Args) -> Result<Exit, Failure> {
    let site = context.site()?;
    let mut in_force = None;
    let event = context.record(&site, &args.who, |book, at| {
        let (body, calibration) = check(&site, book, args, at)?;
        in_force = Some(calibration);
        Ok(body)
    })?;
    let (Body::Verification(verification), Some(calibration)) = (&event.body, in_force) else {
        return Err(Failure::world(
            "the ledger gave back another event than was recorded",
        ));
    };
    tell(context, &site, &event, (verification, &calibration))
}

/// The probe with the point it sits in at `at`.
pub(super) fn sitting<'a>(
    book: &'a Book,
    id: &str,
    at: Timestamp,
) -> Result<(&'a ProbeHistory, &'a Tag), Failure> {
    let probe = in_service(book, id, at)?;
    match sits_at(book, probe, at) {
        Some(point) => Ok((probe, point)),
        None => Err(
            Failure::request(format!("probe `{id}` sits nowhere at that time")).remedy(format!(
                "place it first: `halfcell probe place {id} --point TAG --at T`"
            )),
        ),
    }
}

pub(super) fn check(
    site: &Site,
    book: &Book,
    args: &Args,
    at: Timestamp,
) -> Result<(Body, Dated<Calibration>), Failure> {
    let (probe, tag) = sitting(book, &args.probe, at)?;
    let Some(calibration) = probe.calibration_at(at) else {
        return Err(Failure::request(format!(
            "probe `{}` has no accepted calibration at that time",
            args.probe
        ))
        .remedy("calibrate it first; a verification is held against the calibration in force"));
    };
    let asked = Asked {
        site,
        book,
        probe: &probe.spec,
        at,
        expired: Expired::Refused,
    };
    let readings = standards::readings(asked, &args.buffers)?;
    let errors = errors(&probe.spec, &calibration.fact.line, &readings)?;
    let tolerance = tolerance(site, tag, probe.spec.kind);
    let kind = probe.spec.kind;
    let reasons: Vec<String> = readings
        .iter()
        .zip(&errors)
        .filter(|(_, error)| error.abs() > tolerance)
        .map(|(reading, error)| {
            let (error, tolerance) = (
                figures::signed(kind, *error),
                figures::plain(kind, tolerance),
            );
            format!(
                "error {error} in {} is beyond the tolerance of {tolerance}",
                reading.name
            )
        })
        .collect();
    let body = Body::Verification(Verification {
        probe: probe.spec.id.clone(),
        stage: args.stage,
        readings,
        errors,
        passed: reasons.is_empty(),
        tolerance,
        reasons,
    });
    Ok((body, calibration.clone()))
}

/// What the point can live with; where it stands in no configuration any more, 0.1 pH or 10 mV (common practice, no source).
fn tolerance(site: &Site, tag: &Tag, kind: ProbeKind) -> f64 {
    let configured = site
        .points
        .iter()
        .find(|point| point.tag == *tag)
        .map(|point| point.tolerance);
    configured.unwrap_or(match kind {
        ProbeKind::Ph => 0.1,
        ProbeKind::Orp => 10.0,
    })
}

/// What `line` makes of each reading, minus the standard: pH or mV.
pub(super) fn errors(
    spec: &ProbeSpec,
    line: &ElectrodeLine,
    readings: &[StandardReading],
) -> Result<Vec<f64>, Failure> {
    let exact = Inputs {
        u_mv: 0.0,
        u_temp_c: 0.0,
        u_junction: 0.0,
    };
    readings
        .iter()
        .map(|reading| {
            let wrong =
                |error: String| Failure::request(error).at(format!("buffer `{}`", reading.name));
            let mv = Millivolts::new(reading.mv).map_err(|error| wrong(error.to_string()))?;
            let t = Celsius::new(reading.temp_c).map_err(|error| wrong(error.to_string()))?;
            let value = match spec.kind {
                ProbeKind::Ph => {
                    convert::to_ph(mv, t, line, spec.ph_iso, &exact)
                        .map_err(|error| wrong(error.to_string()))?
                        .value
                }
                ProbeKind::Orp => convert::to_orp(mv, line, &exact).value,
            };
            Ok(value - reading.value)
        })
        .collect()
}

/// The error farthest from zero.
pub(super) fn largest(errors: &[f64]) -> Option<f64> {
    errors
        .iter()
        .copied()
        .max_by(|a, b| a.abs().total_cmp(&b.abs()))
}

fn tell(
    context: &Context,
    site: &Site,
    event: &Event,
    (verification, calibration): (&Verification, &Dated<Calibration>),
) -> Result<Exit, Failure> {
    let book = context.book(site)?;
    let Some(probe) = book.probe(&verification.probe) else {
        return Err(Failure::world(format!(
            "probe `{}` has gone from the ledger",
            verification.probe
        )));
    };
    let kind = probe.spec.kind;
    let verdict = if verification.passed {
        "passed"
    } else {
        "failed"
    };
    if context.json {
        let line = &calibration.fact.line;
        context.put_json(&json!({
            "calibration": calibration.id,
            "probe": verification.probe,
            "verdict": verdict,
            "reasons": verification.reasons,
            "slope": line.slope,
            "u_slope": 2.0 * line.var_slope.sqrt(),
            "offset_mv": line.offset_mv,
            "u_offset_mv": 2.0 * line.var_offset_mv2.sqrt(),
            "residuals_mv": residuals_mv(&probe.spec, line, &verification.readings),
            "as_found_error": largest(&verification.errors),
        }))?;
    } else {
        let mut text = format!(
            "verification of `{}` ({}) {verdict}: tolerance {}\n  {}\n  against calibration {} of {}\n\n",
            verification.probe,
            verification.stage,
            figures::plain(kind, verification.tolerance),
            context.dated(site, event),
            calibration.id,
            context.local(site, calibration.at),
        );
        let rows = verification
            .readings
            .iter()
            .zip(&verification.errors)
            .map(|(reading, error)| {
                let mut row = figures::reading(kind, reading);
                row.push(figures::signed(kind, *error));
                row
            })
            .collect();
        let header = [&figures::READING[..], &["ERROR"]].concat();
        text.push_str(&figures::table(&header, rows, &[1, 2, 3, 4]));
        put(&text)?;
    }
    if verification.passed {
        return Ok(Exit::Done);
    }
    Err(Failure::no(format!(
        "verification of `{}` failed: {}",
        verification.probe,
        verification.reasons.join("; ")
    ))
    .at(format!(
        "{}, by {}",
        context.local(site, event.at),
        event.by
    ))
    .remedy("clean the electrode, take fresh buffer and verify again; if it stays, calibrate"))
}

/// Measured minus what the line gives in each standard, mV.
fn residuals_mv(
    spec: &ProbeSpec,
    line: &ElectrodeLine,
    readings: &[StandardReading],
) -> Vec<Option<f64>> {
    readings
        .iter()
        .map(|reading| match spec.kind {
            ProbeKind::Orp => Some(reading.mv - reading.value - line.offset_mv),
            ProbeKind::Ph => {
                let t = Celsius::new(reading.temp_c).ok()?;
                let k = crate::electrode::slope::nernst_slope(t).mv_per_ph();
                Some(reading.mv - line.offset_mv - line.slope * k * (spec.ph_iso - reading.value))
            }
        })
        .collect()
}
