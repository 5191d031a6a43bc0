//! # `salvage`: what can be read of a damaged ledger, into a new one

use super::context::{Context, ledger_failed, put};
use super::exit::Exit;
use super::failure::Failure;
use crate::ledger;
use serde_json::json;
use std::path::PathBuf;

/// What can be read of a damaged ledger, into a new one
#[derive(Debug, clap::Args)]
#[command(after_help = "\
The damaged file is only read. Stop the daemon first, and prefer a backup when there is one.
Exit code 1 when something could not be read; it is named.

Example:
  halfcell salvage --ledger /var/lib/halfcell/sable-creek.db rescued.db")]
pub(super) struct Args {
    /// The file to write; it must not be there yet
    #[arg(value_name = "FILE")]
    file: PathBuf,
}

pub(super) fn run(context: &Context, args: &Args) -> Result<Exit, Failure> {
    let path = match context.named_ledger() {
        Some(path) => path.to_owned(),
        None => context.site()?.ledger,
    };
    let found =
        ledger::salvage(&path, &args.file, context.now).map_err(|error| ledger_failed(&error))?;
    if context.json {
        context.put_json(&json!({
            "ledger": path,
            "file": args.file,
            "events": found.n_events,
            "sealed": found.n_sealed,
            "arrival": found.n_readings,
            "lost": found.lost,
        }))?;
    } else {
        put(&format!(
            "{}: {} events, {} sealed hours, {} readings of the arrival table\n",
            args.file.display(),
            found.n_events,
            found.n_sealed,
            found.n_readings
        ))?;
    }
    if found.lost.is_empty() {
        return Ok(Exit::Done);
    }
    for loss in &found.lost {
        context.say(loss);
    }
    Err(Failure::no(format!(
        "{} stretches of the ledger could not be read",
        found.lost.len()
    ))
    .at(path.display().to_string())
    .remedy("keep the damaged file, and run `halfcell audit` on the new one"))
}
