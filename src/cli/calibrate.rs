//! # `calibrate`: offset and slope from figures already taken

use super::context::{Context, Who, put, stated};
use super::exit::Exit;
use super::failure::Failure;
use super::figures;
use super::standards::{self, Asked, Expired};
use super::typed::TypedBuffer;
use super::verify::{errors, largest, sitting};
use crate::config::site::Site;
use crate::electrode::fit::{self, Fit, FitError, Limits};
use crate::electrode::history::{
    Book, Calibration, Dated, ElectrodeLine, EventId, ProbeHistory, ProbeKind, StandardReading,
    Verdict,
};
use crate::electrode::units::Timestamp;
use crate::ledger::event::{Body, Event};
use serde_json::json;

/// Fit a probe's offset and slope to readings in buffers and put them in force
#[derive(Debug, clap::Args)]
#[command(after_help = "\
Exit code 1 when the calibration is rejected; the one before stays in force then.

Example:
  halfcell calibrate --probe P-1042 --at '2026-03-02 09:14' --by 'M. Oake' --buffer phthalate,177.1,18.2,L123 --buffer phosphate,7.9,18.3
  halfcell calibrate --probe R-7 --buffer zobell,224.0,25.0
  halfcell calibrate --reject 41 --why 'bottles mixed up' --by 'M. Oake'")]
pub(super) struct Args {
    /// The electrode
    #[arg(long, value_name = "ID", required_unless_present = "reject")]
    probe: Option<String>,
    /// Buffer or check solution, settled mV, °C and perhaps the lot; may be repeated
    #[arg(
        long = "buffer",
        value_name = "KIND_OR_PH,MV,TEMP_C[,LOT]",
        required_unless_present = "reject"
    )]
    buffers: Vec<TypedBuffer>,
    /// Use an expired lot all the same; says why
    #[arg(long = "override", requires = "why")]
    overrides: bool,
    /// Strike a calibration out after the fact, by its number; says why
    #[arg(long, value_name = "CALIBRATION", requires = "why", conflicts_with_all = ["probe", "buffers", "overrides"])]
    reject: Option<EventId>,
    /// Why
    #[arg(long, value_name = "TEXT")]
    why: Option<String>,
    #[command(flatten)]
    who: Who,
}

pub(super) fn run(context: &Context, args: &Args) -> Result<Exit, Failure> {
    let site = context.site()?;
    let why = args
        .why
        .as_deref()
        .map(|why| stated("--why", why))
        .transpose()?;
    if let Some(id) = args.reject {
        let why = why.unwrap_or_default();
        let event = context.record(&site, &args.who, |book, at| strike(book, id, why, at))?;
        return context.recorded(&site, &event, &format!("calibration {id} struck out"));
    }
    let id = args.probe.as_deref().unwrap_or_default();
    let override_why = why.filter(|_| args.overrides);
    let mut before = None;
    let event = context.record(&site, &args.who, |book, at| {
        let (probe, _) = sitting(book, id, at)?;
        before = probe.calibration_at(at).cloned();
        let asked = Asked {
            site: &site,
            book,
            probe: &probe.spec,
            at,
            expired: if override_why.is_some() {
                Expired::Overridden
            } else {
                Expired::WantsOverride
            },
        };
        let readings = standards::readings(asked, &args.buffers)?;
        calibration(probe, before.as_ref(), readings, override_why).map(Body::Calibration)
    })?;
    let Body::Calibration(made) = &event.body else {
        return Err(Failure::world(
            "the ledger gave back another event than was recorded",
        ));
    };
    let book = context.book(&site)?;
    let Some(probe) = book.probe(&made.probe) else {
        return Err(Failure::world(format!(
            "probe `{}` has gone from the ledger",
            made.probe
        )));
    };
    if context.json {
        context.put_json(&object(event.id, made))?;
    } else {
        put(&told(
            context,
            &site,
            (&event, made),
            (probe, before.as_ref()),
        ))?;
    }
    match made.verdict {
        Verdict::Accepted | Verdict::AcceptedWithWarning => Ok(Exit::Done),
        Verdict::Rejected => Err(rejected(context, &site, &event, (made, before.as_ref()))),
    }
}

/// The fit of the readings, as it is recorded.
pub(super) fn calibration(
    probe: &ProbeHistory,
    before: Option<&Dated<Calibration>>,
    readings: Vec<StandardReading>,
    override_why: Option<String>,
) -> Result<Calibration, Failure> {
    let limits = Limits::default();
    let line_before = before.map(|before| &before.fact.line);
    let fitted = match probe.spec.kind {
        ProbeKind::Ph => fit::fit(&readings, probe.spec.ph_iso, line_before, &limits),
        ProbeKind::Orp => fit::fit_orp(&readings, &limits),
    };
    let fit = match fitted {
        Ok(fit) => fit,
        Err(error @ FitError::NoResponse { .. }) => dead(&error, &readings),
        Err(error) => {
            return Err(Failure::request(error.to_string())
                .at(format!("probe `{}`", probe.spec.id))
                .remedy(error.remedy()));
        }
    };
    let as_found_error = match line_before {
        Some(line) => largest(&errors(&probe.spec, line, &readings)?),
        None => None,
    };
    Ok(Calibration {
        probe: probe.spec.id.clone(),
        readings,
        line: fit.line,
        residuals_mv: fit.residuals_mv,
        verdict: fit.verdict,
        reasons: fit.reasons,
        as_found_error,
        span: fit.span,
        override_why,
    })
}

/// An electrode that gives the same potential in every buffer: no slope at all, which is a finding and not a typing error.
fn dead(error: &FitError, readings: &[StandardReading]) -> Fit {
    let n = f64::from(u32::try_from(readings.len()).unwrap_or(u32::MAX));
    let mean = readings.iter().map(|reading| reading.mv).sum::<f64>() / n;
    let values = || readings.iter().map(|reading| reading.value);
    let span = [
        values().fold(f64::INFINITY, f64::min),
        values().fold(f64::NEG_INFINITY, f64::max),
    ];
    let u_mv = readings
        .iter()
        .map(|reading| reading.u_mv)
        .fold(0.0, f64::max);
    // Over the buffers' distance d at 25 °C, two readings of u_mv each give the slope with u = √2·u_mv/(k·d).
    let u_slope = std::f64::consts::SQRT_2 * u_mv / (figures::K_25C * (span[1] - span[0]));
    Fit {
        line: ElectrodeLine {
            offset_mv: mean,
            slope: 0.0,
            var_offset_mv2: u_mv * u_mv,
            var_slope: u_slope * u_slope,
            cov_mv: 0.0,
        },
        residuals_mv: readings.iter().map(|reading| reading.mv - mean).collect(),
        chi2: 0.0,
        span,
        verdict: Verdict::Rejected,
        reasons: vec![format!("{error}: {}", error.remedy())],
    }
}

fn strike(book: &Book, id: EventId, why: String, at: Timestamp) -> Result<Body, Failure> {
    let owner = book.probes().find(|probe| {
        probe
            .calibrations
            .iter()
            .any(|calibration| calibration.id == id)
    });
    let Some(probe) = owner else {
        return Err(Failure::request(format!("no calibration {id}"))
            .remedy("name the number of a calibration; `halfcell health` shows the one in force"));
    };
    if probe.struck.iter().any(|struck| struck.fact == id) {
        return Err(
            Failure::request(format!("calibration {id} is struck out already"))
                .at(format!("probe `{}`", probe.spec.id))
                .remedy("leave it as it is"),
        );
    }
    if probe.calibrations.iter().any(|c| c.id == id && c.at > at) {
        return Err(
            Failure::request(format!("calibration {id} was made after that time"))
                .at(format!("probe `{}`", probe.spec.id))
                .remedy("leave `--at` out"),
        );
    }
    Ok(Body::CalibrationStruck {
        probe: probe.spec.id.clone(),
        calibration: id,
        why,
    })
}

fn object(id: EventId, made: &Calibration) -> serde_json::Value {
    json!({
        "calibration": id,
        "probe": made.probe,
        "verdict": made.verdict,
        "reasons": made.reasons,
        "slope": made.line.slope,
        "u_slope": 2.0 * made.line.var_slope.sqrt(),
        "offset_mv": made.line.offset_mv,
        "u_offset_mv": 2.0 * made.line.var_offset_mv2.sqrt(),
        "residuals_mv": made.residuals_mv,
        "as_found_error": made.as_found_error,
    })
}

fn told(
    context: &Context,
    site: &Site,
    (event, made): (&Event, &Calibration),
    (probe, before): (&ProbeHistory, Option<&Dated<Calibration>>),
) -> String {
    let kind = probe.spec.kind;
    let mut text = format!(
        "calibration {} of `{}` {}\n  {}\n\n",
        event.id,
        made.probe,
        verdict(made.verdict),
        context.dated(site, event)
    );
    let as_found = match (made.as_found_error, before) {
        (Some(error), Some(before)) => format!(
            "{} at most, by calibration {} of {}",
            figures::signed(kind, error),
            before.id,
            context.local(site, before.at)
        ),
        _ => "nothing to compare with: first calibration".to_owned(),
    };
    let mut facts = vec![("as found", as_found)];
    if kind == ProbeKind::Ph {
        facts.push(("slope", figures::slope(&made.line)));
    }
    facts.push(("offset", figures::offset(&made.line)));
    if let Some(before) = before {
        facts.push(("change", change(kind, &made.line, &before.fact.line)));
    }
    facts.extend(
        made.reasons
            .iter()
            .map(|reason| ("because", reason.clone())),
    );
    if let Some(why) = &made.override_why {
        facts.push(("override", why.clone()));
    }
    text.push_str(&figures::facts(&facts));
    text.push('\n');
    let rows = made
        .readings
        .iter()
        .zip(&made.residuals_mv)
        .map(|(reading, residual)| {
            let mut row = figures::reading(kind, reading);
            row.push(format!("{} mV", figures::with_sign(*residual, 2)));
            if kind == ProbeKind::Ph {
                row.push(residual_ph(&made.line, reading, *residual));
            }
            row
        })
        .collect();
    let header = match kind {
        ProbeKind::Ph => [&figures::READING[..], &["RESIDUAL", "IN PH"]].concat(),
        ProbeKind::Orp => [&figures::READING[..], &["RESIDUAL"]].concat(),
    };
    text.push_str(&figures::table(&header, rows, &[1, 2, 3, 4, 5]));
    text
}

fn verdict(verdict: Verdict) -> &'static str {
    match verdict {
        Verdict::Accepted => "accepted",
        Verdict::AcceptedWithWarning => "accepted with warning",
        Verdict::Rejected => "rejected",
    }
}

/// By how much too high the buffer reads under this line, pH.
fn residual_ph(line: &ElectrodeLine, reading: &StandardReading, residual_mv: f64) -> String {
    let sensitivity = line.slope * figures::k(reading.temp_c);
    if sensitivity.abs() < 1e-9 {
        return figures::NOTHING.to_owned();
    }
    format!("{} pH", figures::with_sign(-residual_mv / sensitivity, 4))
}

/// `slope -0.7 %, offset +2.1 mV since the calibration before`.
fn change(kind: ProbeKind, now: &ElectrodeLine, before: &ElectrodeLine) -> String {
    let offset = figures::with_sign(now.offset_mv - before.offset_mv, 1);
    match kind {
        ProbeKind::Ph => {
            let slope = figures::with_sign(100.0 * (now.slope - before.slope), 1);
            format!("slope {slope} %, offset {offset} mV")
        }
        ProbeKind::Orp => format!("offset {offset} mV"),
    }
}

fn rejected(
    context: &Context,
    site: &Site,
    event: &Event,
    (made, before): (&Calibration, Option<&Dated<Calibration>>),
) -> Failure {
    let buffers: Vec<String> = made
        .readings
        .iter()
        .map(|reading| match &reading.lot {
            Some(lot) => format!("{} (lot {lot})", reading.name),
            None => reading.name.clone(),
        })
        .collect();
    let stays = match before {
        Some(before) => format!(
            "calibration {} of {} stays in force",
            before.id,
            context.local(site, before.at)
        ),
        None => "no calibration is in force, so there is no value".to_owned(),
    };
    Failure::no(format!(
        "calibration {} of `{}` rejected: {}",
        event.id,
        made.probe,
        made.reasons.join("; ")
    ))
    .at(format!(
        "{}, {}, by {}",
        buffers.join(" and "),
        context.local(site, event.at),
        event.by
    ))
    .remedy(format!("do as said and calibrate again; {stays}"))
}
