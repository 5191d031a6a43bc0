//! # `hold`: a function check, ending by itself

use super::context::{Context, Who, point};
use super::exit::Exit;
use super::failure::Failure;
use crate::electrode::history::{Hold, Tag};
use crate::ledger::event::Body;

/// Longest hold: longer is no function check but a point out of service.
const LONGEST_MS: i64 = 7 * 86_400_000;

/// Function check: alarms suppressed, readings marked, ends by itself
#[derive(Debug, clap::Args)]
#[command(after_help = "\
Example:
  halfcell hold --point POND-3 --for 30m --why 'cleaning the electrode' --by 'M. Oake'")]
pub(super) struct Args {
    /// The point
    #[arg(long, value_name = "TAG")]
    point: String,
    /// How long, at most 7d
    #[arg(long = "for", value_name = "DURATION")]
    length: String,
    /// Why
    #[arg(long, value_name = "TEXT")]
    why: String,
    #[command(flatten)]
    who: Who,
}

pub(super) fn run(context: &Context, args: &Args) -> Result<Exit, Failure> {
    let site = context.site()?;
    point(&site, &args.point)?;
    let length_ms = super::context::duration_ms(&args.length)?;
    if !(1_000..=LONGEST_MS).contains(&length_ms) {
        return Err(Failure::request(format!(
            "a hold of {} is not between 1s and 7d",
            args.length
        ))
        .remedy("hold for as long as the work takes; it can be repeated"));
    }
    let why = super::context::stated("--why", &args.why)?;
    let event = context.record(&site, &args.who, |_, at| {
        Ok(Body::Hold(Hold {
            point: Tag::from(args.point.as_str()),
            until: at.plus_ms(length_ms),
            why,
        }))
    })?;
    let until = context.local(&site, event.at.plus_ms(length_ms));
    context.recorded(
        &site,
        &event,
        &format!("`{}` on hold until {until}", args.point),
    )
}
