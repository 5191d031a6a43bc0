//! # `health`: how each electrode is doing

use super::ahead::{self, Ahead, Learnt};
use super::context::{Context, put};
use super::exit::Exit;
use super::failure::Failure;
use super::figures;
use super::probe::{in_service, sits_at};
use super::status::Moment;
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
    let learnt = Learnt::from(&book, at);
    let healths = probes
        .into_iter()
        .map(|probe| health(&site, (&reader, &points), (&book, &learnt), (probe, moment)))
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
    /// What its track says; `None` before its first reading in a standard.
    ahead: Option<Ahead>,
}

fn health<'a>(
    site: &Site,
    (reader, points): (&Reader, &[(Tag, PointId)]),
    (book, learnt): (&Book, &Learnt),
    (probe, moment): (&'a ProbeHistory, Moment),
) -> Result<Health<'a>, LedgerError> {
    let at = moment.at();
    let tag = sits_at(book, probe, at);
    let point = tag.and_then(|tag| site.points.iter().find(|point| point.tag == *tag));
    let newest = match tag {
        Some(tag) => moment.newest(reader, points, tag)?,
        None => None,
    };
    let reading = newest.map(|newest| newest.reading);
    let ahead = learnt
        .track(probe)
        .map(|track| ahead::look(&track, probe, (point, reading.as_ref()), at));
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
            .zip(newest)
            .is_some_and(|(point, newest)| newest.stale(point, at)),
        on_hold: tag.is_some_and(|tag| book.hold_at(tag, at).is_some()),
        tolerance: point.map_or(f64::INFINITY, |point| point.tolerance),
    });
    Ok(Health {
        probe,
        point: tag,
        calibration: probe.calibration_at(at),
        status,
        reasons,
        ahead,
    })
}

/// The contract's shape: slope and offset as now estimated, and in `calibration` as last accepted.
fn object(context: &Context, health: &Health<'_>) -> Value {
    let now = health.ahead.as_ref().and_then(|ahead| ahead.now);
    let line = now.map(|now| now.line());
    let by = health.ahead.as_ref().and_then(|ahead| ahead.calibrate_by);
    let slope = line.map(|line| line.slope);
    let time = |t| context.rfc3339(t);
    json!({
        "probe": health.probe.spec.id,
        "point": health.point,
        "status": health.status,
        "reasons": health.reasons,
        "slope": slope,
        "u_slope": line.map(|line| 2.0 * line.var_slope.sqrt()),
        "offset_mv": line.map(|line| line.offset_mv),
        "u_offset_mv": line.map(|line| 2.0 * line.var_offset_mv2.sqrt()),
        "slope_mv_per_ph_25c": match health.probe.spec.kind {
            ProbeKind::Ph => slope.map(|slope| slope * figures::K_25C),
            ProbeKind::Orp => None,
        },
        "drift_mv_per_day": now.map(|now| now.drift_mv_per_day()),
        "n_events": health.ahead.as_ref().map(|ahead| ahead.n_events),
        "calibrate_by": by.map(|by| time(by.by)),
        "calibrate_by_earliest": by.map(|by| time(by.earliest)),
        "calibrate_by_latest": by.map(|by| time(by.latest)),
        "calibrate_by_reason": by.map(|by| ahead::reason_word(by.reason)),
        "causes": [],
        "calibration": health.calibration.map(|calibration| {
            let line = &calibration.fact.line;
            json!({
                "id": calibration.id,
                "at": time(calibration.at),
                "slope": line.slope,
                "offset_mv": line.offset_mv,
                "u_slope": 2.0 * line.var_slope.sqrt(),
                "u_offset_mv": 2.0 * line.var_offset_mv2.sqrt(),
            })
        }),
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
    if let Some(ahead) = &health.ahead {
        facts.extend(estimated(context, site, health, ahead));
    }
    format!(
        "`{}` ({}) {place}: {}\n{}",
        spec.id,
        spec.kind,
        health.status,
        figures::facts(&facts)
    )
}

/// What the track says, as lines.
fn estimated(
    context: &Context,
    site: &Site,
    health: &Health<'_>,
    ahead: &Ahead,
) -> Vec<(&'static str, String)> {
    let mut facts = Vec::new();
    if let Some(now) = ahead.now {
        let line = now.line();
        let slope = match health.probe.spec.kind {
            ProbeKind::Ph => format!("slope {}, ", figures::slope(&line)),
            ProbeKind::Orp => String::new(),
        };
        let (offset, drift) = (figures::offset(&line), now.drift_mv_per_day());
        let n_events = ahead.n_events;
        let plural = if n_events == 1 { "" } else { "s" };
        facts.push((
            "thought now",
            format!("{slope}offset {offset}, drifting {drift:+.2} mV a day (from {n_events} visit{plural})"),
        ));
    }
    if let Some(when) = ahead.calibrate_by {
        let day = |t| {
            let local = context.local(site, t);
            local.split(' ').next().unwrap_or_default().to_owned()
        };
        facts.push((
            "calibrate by",
            format!(
                "{} (between {} and {} the error passes the tolerance); {}",
                day(when.by),
                day(when.earliest),
                day(when.latest),
                ahead::because(when.reason)
            ),
        ));
    }
    facts
}
