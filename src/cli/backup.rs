//! # `backup`: a consistent copy while the daemon runs

use super::context::{Context, ledger_failed, put};
use super::exit::Exit;
use super::failure::Failure;
use crate::ledger;
use indicatif::{ProgressBar, ProgressStyle};
use serde_json::json;
use std::path::PathBuf;

/// A consistent, audited copy of the ledger, also while the daemon runs
#[derive(Debug, clap::Args)]
#[command(after_help = "\
The copy bears its name only when it is whole. It is compact: one file, without a log beside it.
To restore: stop the daemon, move the damaged file aside together with its -wal and -shm, copy the backup to its place,
run `halfcell audit`, start the daemon.

Example:
  halfcell backup /mnt/backup/sable-creek.db")]
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
    let bar = ProgressBar::new(0);
    if let Ok(style) =
        ProgressStyle::with_template("{bar:40} {bytes} of about {total_bytes}, {eta} left")
    {
        bar.set_style(style);
    }
    let shown = bar.clone();
    let copied = ledger::backup(&path, &args.file, move |done, expected| {
        shown.set_length(expected);
        shown.set_position(done);
    });
    bar.finish_and_clear();
    let report = copied.map_err(|error| ledger_failed(&error))?;
    let size = std::fs::metadata(&args.file).map_or(0, |file| file.len());
    if context.json {
        context.put_json(&json!({
            "ledger": path,
            "file": args.file,
            "bytes": size,
            "sound": report.is_sound(),
            "events": report.n_events,
            "readings": report.n_readings,
            "anchor": report.head,
        }))?;
    } else if report.is_sound() {
        put(&format!(
            "{}: {} events and {} readings, {size} bytes, audited\n",
            args.file.display(),
            report.n_events,
            report.n_readings
        ))?;
    }
    if report.is_sound() {
        return Ok(Exit::Done);
    }
    let breaks = report.breaks.iter().map(ToString::to_string);
    let wrong: Vec<String> = breaks.chain(report.damage).collect();
    Err(Failure::no(format!(
        "the copy is whole but not sound, as the ledger itself: {}",
        wrong.join("; ")
    ))
    .at(args.file.display().to_string())
    .remedy("run `halfcell audit`, and keep the backups made before"))
}
