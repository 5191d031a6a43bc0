//! # `health`: how each electrode is doing

use super::context::{Context, put};
use super::exit::Exit;
use super::failure::Failure;
use super::figures;
use super::probe::{in_service, sits_at};
use super::status::{Moment, stale};
use crate::config::site::Site;
use crate::electrode::fit::Limits;
use crate::electrode::history::{Book, Calibration, Dated, ProbeHistory, ProbeKind, Tag};
use crate::electrode::units::Timestamp;
use crate::ledger::{LedgerError, PointId, Reader};
use crate::watch::condition::{Evidence, condition};
use crate::watch::status::Status;
use serde_json::{Value, json};

/// Slope, offset, age, limits and status of each electrode, with the reasons
#[derive(Debug, clap::Args)]
#[command(after_help = "\
Example:
  halfcell health
  halfcell health --probe P-1042 --at -7d --json")]
pub(super) struct Args {
    /// Only this electrode
    #[arg(long, value_name = "ID")]
    probe: Option<String>,
    /// What was known then
    #[arg(long, value_name = "T", allow_hyphen_values = true)]
    at: Option<String>,
}

pub(super) fn run(context: &Context, args: &Args) -> Result<Exit, Failure> {
    let site = context.site()?;
    let moment = Moment::asked(context, &site, args.at.as_deref())?;
    let at = moment.at();
    let reader = context.reader(&site)?;
    let failed = |error: LedgerError| super::context::ledger_failed(&error);
    let book = reader.book(None).map_err(failed)?;
    let points = reader.points().map_err(failed)?;
    let probes: Vec<&ProbeHistory> = match &args.probe {
        Some(id) => vec![in_service(&book, id, at)?],
        None => book
            .probes()
            .filter(|probe| !probe.retired_at(at))
            .collect(),
    };
    let healths = probes
        .into_iter()
        .map(|probe| health(&site, (&reader, &points), &book, (probe, moment)))
        .collect::<Result<Vec<_>, _>>()
        .map_err(failed)?;
    if context.json {
        let probes: Vec<Value> = healths
            .iter()
            .map(|health| object(context, health))
            .collect();
        return context.put_json(&json!({ "probes": probes }));
    }
    if healths.is_empty() {
        return put("no probes in service; add one with `halfcell probe add ID --kind ph`\n");
    }
    let texts: Vec<String> = healths
        .iter()
        .map(|health| told(context, &site, health, at))
        .collect();
    put(&texts.join("\n"))
}

struct Health<'a> {
    probe: &'a ProbeHistory,
    point: Option<&'a Tag>,
    calibration: Option<&'a Dated<Calibration>>,
    status: Status,
    reasons: Vec<String>,
}

fn health<'a>(
    site: &Site,
    (reader, points): (&Reader, &[(Tag, PointId)]),
    book: &Book,
    (probe, moment): (&'a ProbeHistory, Moment),
) -> Result<Health<'a>, LedgerError> {
    let at = moment.at();
    let tag = sits_at(book, probe, at);
    let point = tag.and_then(|tag| site.points.iter().find(|point| point.tag == *tag));
    let reading = match tag {
        Some(tag) => moment.newest(reader, points, tag)?,
        None => None,
    };
    // Another electrode may have taken its place; then it sits nowhere and owes no readings.
    let displaced = ProbeHistory {
        moves: Vec::new(),
        ..probe.clone()
    };
    let (status, reasons) = condition(&Evidence {
        at,
        probe: if tag.is_some() { probe } else { &displaced },
        reading: reading.as_ref(),
        stale: point
            .zip(reading.as_ref())
            .is_some_and(|(point, reading)| stale(point, reading, at)),
        on_hold: tag.is_some_and(|tag| book.hold_at(tag, at).is_some()),
        tolerance: point.map_or(f64::INFINITY, |point| point.tolerance),
    });
    Ok(Health {
        probe,
        point: tag,
        calibration: probe.calibration_at(at),
        status,
        reasons,
    })
}

/// The contract's shape. Slope and offset as now estimated are, for now, those of the calibration in force.
fn object(context: &Context, health: &Health<'_>) -> Value {
    let line = health.calibration.map(|calibration| &calibration.fact.line);
    let slope = line.map(|line| line.slope);
    let u_slope = line.map(|line| 2.0 * line.var_slope.sqrt());
    let offset_mv = line.map(|line| line.offset_mv);
    let u_offset_mv = line.map(|line| 2.0 * line.var_offset_mv2.sqrt());
    json!({
        "probe": health.probe.spec.id,
        "point": health.point,
        "status": health.status,
        "reasons": health.reasons,
        "slope": slope,
        "u_slope": u_slope,
        "offset_mv": offset_mv,
        "u_offset_mv": u_offset_mv,
        "slope_mv_per_ph_25c": match health.probe.spec.kind {
            ProbeKind::Ph => slope.map(|slope| slope * figures::K_25C),
            ProbeKind::Orp => None,
        },
        "drift_mv_per_day": null,
        "calibrate_by": null,
        "calibrate_by_earliest": null,
        "calibrate_by_latest": null,
        "causes": [],
        "calibration": health.calibration.map(|calibration| json!({
            "id": calibration.id,
            "at": context.rfc3339(calibration.at),
            "slope": slope,
            "offset_mv": offset_mv,
            "u_slope": u_slope,
            "u_offset_mv": u_offset_mv,
        })),
    })
}

fn told(context: &Context, site: &Site, health: &Health<'_>, at: Timestamp) -> String {
    let spec = &health.probe.spec;
    let place = health
        .point
        .map_or_else(|| "in no point".to_owned(), |tag| format!("at `{tag}`"));
    let mut facts: Vec<(&str, String)> = health
        .reasons
        .iter()
        .map(|reason| ("because", reason.clone()))
        .collect();
    let limits = Limits::default();
    match health.calibration {
        None => facts.push(("calibrated", "never accepted".to_owned())),
        Some(calibration) => {
            let line = &calibration.fact.line;
            let offset_limit = match spec.kind {
                ProbeKind::Ph => {
                    let [low, high] = limits.slope_accept.map(|slope| 100.0 * slope);
                    let slope = figures::slope(line);
                    facts.push(("slope", format!("{slope}, good within {low} to {high} %")));
                    limits.offset_accept_mv
                }
                ProbeKind::Orp => limits.orp_offset_accept_mv,
            };
            let offset = figures::offset(line);
            facts.push((
                "offset",
                format!("{offset}, good within ±{offset_limit} mV"),
            ));
            let (id, by) = (calibration.id, &calibration.by);
            let age = figures::age(calibration.at, at);
            let when = context.local(site, calibration.at);
            facts.push((
                "calibrated",
                format!("{age} ago, {when} (calibration {id}, by {by})"),
            ));
        }
    }
    format!(
        "`{}` ({}) {place}: {}\n{}",
        spec.id,
        spec.kind,
        health.status,
        figures::facts(&facts)
    )
}
