//! # `grab`: a bench reference for a point

use super::context::{Context, Who, point};
use super::exit::Exit;
use super::failure::Failure;
use super::figures;
use super::typed;
use crate::electrode::history::{Grab, ProbeKind, Tag};
use crate::ledger::event::Body;

/// Expanded uncertainty (k = 2) of a bench reading nobody stated one for: a two-point calibrated bench meter and a
/// sample carried to it, pH (common practice, no source).
const BENCH_U_PH: f64 = 0.05;
/// Likewise for ORP, mV.
const BENCH_U_MV: f64 = 10.0;

/// Enter a bench meter's value of the same liquid as a reference for a point
#[derive(Debug, clap::Args)]
#[command(after_help = "\
Without --u the bench is taken as good to ±0.05 pH or ±10 mV.

Example:
  halfcell grab --point POND-3 --value 7.12 --u 0.03 --at '2026-03-02 09:20' --by 'M. Oake'")]
pub(super) struct Args {
    /// The point
    #[arg(long, value_name = "TAG")]
    point: String,
    /// pH, or mV against the probe's own reference
    #[arg(long, value_name = "PH_OR_MV", value_parser = typed::figure, allow_negative_numbers = true)]
    value: f64,
    /// Its expanded uncertainty (k = 2), in the same unit
    #[arg(long, value_name = "U", value_parser = typed::uncertainty)]
    u: Option<f64>,
    #[command(flatten)]
    who: Who,
}

pub(super) fn run(context: &Context, args: &Args) -> Result<Exit, Failure> {
    let site = context.site()?;
    let kind = point(&site, &args.point)?.quantity;
    let (possible, bench_u) = match kind {
        ProbeKind::Ph => (-1.0..=15.0, BENCH_U_PH),
        ProbeKind::Orp => (-2_000.0..=2_000.0, BENCH_U_MV),
    };
    if !possible.contains(&args.value) {
        let (unit, value) = (figures::unit(kind), args.value);
        return Err(Failure::request(format!(
            "a grab of {value} {unit} is outside {} to {} {unit}",
            possible.start(),
            possible.end()
        ))
        .at(format!("point `{}`", args.point))
        .remedy(format!("write the bench meter's value in {unit}")));
    }
    let grab = Grab {
        point: Tag::from(args.point.as_str()),
        value: args.value,
        u: args.u.unwrap_or(bench_u),
    };
    let told = format!(
        "grab sample of {} at `{}`",
        figures::with_u(grab.value, grab.u, figures::unit(kind)),
        args.point
    );
    let event = context.record(&site, &args.who, |_, _| Ok(Body::Grab(grab)))?;
    context.recorded(&site, &event, &told)
}
