//! # `import`: readings in, through the same pipeline as live

use super::context::{Context, Who, ledger_failed, put};
use super::exit::Exit;
use super::failure::Failure;
use super::rows::{Broken, Row, Rows};
use crate::config::site::Site;
use crate::electrode::history::EventId;
use crate::ledger::event::Body;
use crate::ledger::{Imported, Ledger, LedgerError, PointId};
use crate::pipeline::{Arrival, Figure, Standing, read};
use crate::watch::reading::Reading;
use indicatif::{ProgressBar, ProgressStyle};
use serde_json::json;
use std::fs::File;
use std::io::BufReader;
use std::path::{Path, PathBuf};
use std::sync::Arc;

/// Broken rows shown one by one; of the rest only the number.
const SHOWN: usize = 20;
/// Rows handed to the ledger at once.
const BATCH: usize = 50_000;

/// Readings in: backfill from a meter's memory or another logger
#[derive(Debug, clap::Args)]
#[command(after_help = "\
The file's first line is `time,point,mv,temp_c`, columns in any order; time is RFC 3339 or milliseconds since 1970,
temp_c may be empty. Rows already there are skipped; broken rows are named by their line, and exit code 1 says so.

Example:
  halfcell import meter-memory.csv --by 'M. Oake'")]
pub(super) struct Args {
    /// The file
    #[arg(value_name = "FILE.csv")]
    file: PathBuf,
    #[command(flatten)]
    who: Who,
}

/// What came of an import.
#[derive(Debug, Default)]
struct Tally {
    imported: Imported,
    broken: u64,
    shown: Vec<Broken>,
}

pub(super) fn run(context: &Context, args: &Args) -> Result<Exit, Failure> {
    let site = context.site()?;
    let unreadable = |error: std::io::Error| {
        Failure::request(format!("cannot read {}: {error}", args.file.display()))
            .remedy("name a CSV file")
    };
    let file = File::open(&args.file).map_err(unreadable)?;
    let size = file.metadata().map_err(unreadable)?.len();
    let mut rows = Rows::new(BufReader::with_capacity(1 << 18, file), &site, context.now)?;
    if !rows.unread.is_empty() {
        context.say(&format!("columns not read: {}", rows.unread.join(", ")));
    }
    // Who imports is asked before anything is written.
    let entry = context.entry(&site, &args.who)?;
    let bar = bar(size);
    let failed = |error: LedgerError| ledger_failed(&error);
    let mut ledger = context.writer(&site)?;
    let standing = Standing::new(Arc::new(context.book(&site)?));
    let ids = ids(&mut ledger, &site).map_err(failed)?;
    let mut tally = Tally::default();
    let mut batch: Vec<(PointId, Reading)> = Vec::with_capacity(BATCH);
    loop {
        let row = rows.next()?;
        let done = row.is_none();
        match row {
            Some(Ok(row)) => batch.push((ids[row.point], judged(&site, &standing, &row))),
            Some(Err(broken)) => tally.note(broken),
            None => {}
        }
        if batch.len() == BATCH || done {
            tally.add(ledger.import(&batch, context.now).map_err(failed)?);
            batch.clear();
            bar.set_position(rows.bytes());
        }
        if done {
            break;
        }
    }
    bar.finish_and_clear();
    // An import that brought nothing is no event: the same file twice leaves the ledger as it was.
    let mut event = None;
    if tally.imported.kept > 0 {
        let body = Body::Import {
            file: name(&args.file),
            kept: tally.imported.kept,
            repeated: tally.imported.repeated,
            broken: tally.broken,
            conflicting: tally.imported.conflicting,
        };
        event = Some(ledger.record(entry.event(body)).map_err(failed)?.id);
    }
    ledger.seal_all(context.now).map_err(failed)?;
    tell(context, args, &tally, event)
}

impl Tally {
    const fn add(&mut self, more: Imported) {
        self.imported.kept += more.kept;
        self.imported.repeated += more.repeated;
        self.imported.conflicting += more.conflicting;
    }

    fn note(&mut self, broken: Broken) {
        self.broken += 1;
        if self.shown.len() < SHOWN {
            self.shown.push(broken);
        }
    }

    fn rows(&self) -> u64 {
        self.imported.kept + self.imported.repeated + self.broken
    }
}

/// The way of a live sample.
fn judged(site: &Site, standing: &Standing, row: &Row) -> Reading {
    let arrival = Arrival {
        at: row.at,
        mv: Figure::Number(row.mv),
        temperature: row.temp_c.map_or(Figure::Nothing, Figure::Number),
    };
    read(&site.points[row.point], standing, &arrival)
}

fn ids(ledger: &mut Ledger, site: &Site) -> Result<Vec<PointId>, LedgerError> {
    site.points
        .iter()
        .map(|point| ledger.point(&point.tag, point.quantity))
        .collect()
}

/// Hides itself when standard error is not a terminal.
fn bar(size: u64) -> ProgressBar {
    let bar = ProgressBar::new(size);
    if let Ok(style) =
        ProgressStyle::with_template("{bar:40} {percent}% {bytes} of {total_bytes}, {eta} left")
    {
        bar.set_style(style);
    }
    bar
}

/// The file's name without its folder, as it is recorded.
fn name(path: &Path) -> String {
    path.file_name()
        .map_or_else(|| path.to_string_lossy(), |name| name.to_string_lossy())
        .into_owned()
}

fn tell(
    context: &Context,
    args: &Args,
    tally: &Tally,
    event: Option<EventId>,
) -> Result<Exit, Failure> {
    let file = name(&args.file);
    let (
        Imported {
            kept,
            repeated,
            conflicting,
        },
        broken,
    ) = (tally.imported, tally.broken);
    if context.json {
        context.put_json(&json!({
            "event": event,
            "file": file,
            "kept": kept,
            "repeated": repeated,
            "broken": broken,
            "conflicting": conflicting,
            "broken_rows": tally.shown,
        }))?;
    } else {
        put(&format!(
            "{file}: {kept} rows kept, {repeated} already there, {broken} broken, {conflicting} conflicting\n"
        ))?;
    }
    if broken == 0 {
        return Ok(Exit::Done);
    }
    for row in &tally.shown {
        context.say(&format!("line {}: {}", row.line, row.why));
    }
    if let more @ 1.. = broken.saturating_sub(tally.shown.len() as u64) {
        context.say(&format!("and {more} more broken rows"));
    }
    let rows = tally.rows();
    Err(Failure::no(format!(
        "{broken} of {rows} rows of {file} are broken; the rest is kept"
    ))
    .remedy("mend the lines named and import the file again; rows already there are skipped"))
}
