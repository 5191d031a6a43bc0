//! # `export`: readings out, hour by hour

use super::context::{Context, ledger_failed, point};
use super::exit::Exit;
use super::failure::Failure;
use crate::config::site::{Point, Site};
use crate::config::time::rfc3339_ms;
use crate::electrode::history::Book;
use crate::electrode::units::Timestamp;
use crate::watch::flags::Test;
use crate::watch::reading::Reading;
use serde_json::json;
use std::fs::File;
use std::io::{self, BufWriter, Write};
use std::ops::ControlFlow;
use std::path::PathBuf;

/// The columns, in the contract's order.
const COLUMNS: [&str; 12] = [
    "time",
    "point",
    "mv",
    "temp_c",
    "value",
    "u",
    "flag",
    "tests",
    "probe",
    "calibration",
    "best",
    "u_best",
];

/// How rows are written.
#[derive(Debug, Clone, Copy, PartialEq, Eq, clap::ValueEnum)]
enum Format {
    /// Comma-separated values with a header
    Csv,
    /// One JSON object per line
    Jsonl,
}

/// Readings out, as CSV or JSON lines
#[derive(Debug, clap::Args)]
#[command(after_help = "\
From the first moment of --from up to, not including, --to; point after point, each in order of time.

Example:
  halfcell export --point POND-3 --from 2026-03-01 --to 2026-03-02 --format csv -o pond-3.csv
  halfcell export --point POND-3 --point POND-4 --from -2h --format jsonl | head")]
pub(super) struct Args {
    /// The point; may be repeated (default: all)
    #[arg(long = "point", value_name = "TAG")]
    points: Vec<String>,
    /// From (default: the first reading)
    #[arg(long, value_name = "T", allow_hyphen_values = true)]
    from: Option<String>,
    /// Up to (default: now)
    #[arg(long, value_name = "T", allow_hyphen_values = true)]
    to: Option<String>,
    /// How rows are written
    #[arg(long, value_enum, default_value_t = Format::Csv)]
    format: Format,
    /// Into this file instead of standard output
    #[arg(short, long, value_name = "FILE")]
    output: Option<PathBuf>,
}

pub(super) fn run(context: &Context, args: &Args) -> Result<Exit, Failure> {
    let site = context.site()?;
    let points: Vec<&Point> = if args.points.is_empty() {
        site.points.iter().collect()
    } else {
        args.points
            .iter()
            .map(|tag| point(&site, tag))
            .collect::<Result<_, _>>()?
    };
    let to = match &args.to {
        Some(text) => context.time(&site, text)?,
        None => context.now.plus_ms(1),
    };
    let from = args
        .from
        .as_deref()
        .map(|text| context.time(&site, text))
        .transpose()?;
    if let Some(from) = from.filter(|from| *from >= to) {
        return Err(Failure::request(format!(
            "nothing lies between {} and {}",
            context.local(&site, from),
            context.local(&site, to)
        ))
        .remedy("give a --from before --to"));
    }
    let span = (from, to);
    match &args.output {
        None => {
            let stdout = io::stdout().lock();
            written(
                context,
                &site,
                (&points, span),
                Rows::new(args.format, stdout),
            )
        }
        Some(path) => {
            let file = File::create(path).map_err(|error| {
                Failure::world(format!("cannot write {}: {error}", path.display()))
            })?;
            let exit = written(
                context,
                &site,
                (&points, span),
                Rows::new(args.format, &file),
            )?;
            // What is said to be exported must be there after a power cut too.
            file.sync_all().map_err(|error| Failure::output(&error))?;
            Ok(exit)
        }
    }
}

fn written<W: Write>(
    context: &Context,
    site: &Site,
    (points, (from, to)): (&[&Point], (Option<Timestamp>, Timestamp)),
    mut rows: Rows<W>,
) -> Result<Exit, Failure> {
    let reader = context.reader(site)?;
    let failed = |error| ledger_failed(&error);
    let book = reader.book(None).map_err(failed)?;
    let known = reader.points().map_err(failed)?;
    rows.header()?;
    let from = from.unwrap_or(Timestamp::from_ms(i64::MIN));
    for point in points {
        let Some((_, id)) = known.iter().find(|(tag, _)| *tag == point.tag) else {
            continue;
        };
        // The ledger gives each hour in order of arrival; a file is read in order of time.
        let mut hour: Vec<Reading> = Vec::new();
        let mut ended = Ok(());
        reader
            .readings(*id, from, to, |_, reading| {
                if hour
                    .last()
                    .is_some_and(|last| hour_of(last) != hour_of(&reading))
                {
                    ended = rows.hour(point, &book, &mut hour);
                }
                hour.push(reading);
                if ended.is_ok() {
                    ControlFlow::Continue(())
                } else {
                    ControlFlow::Break(())
                }
            })
            .map_err(failed)?;
        ended?;
        rows.hour(point, &book, &mut hour)?;
    }
    rows.end()
}

fn hour_of(reading: &Reading) -> i64 {
    reading.at.ms().div_euclid(3_600_000)
}

/// Where rows go.
enum Rows<W: Write> {
    Csv(Box<csv::Writer<W>>),
    Jsonl(BufWriter<W>),
}

impl<W: Write> Rows<W> {
    fn new(format: Format, to: W) -> Self {
        match format {
            Format::Csv => Self::Csv(Box::new(
                csv::WriterBuilder::new()
                    .buffer_capacity(1 << 16)
                    .from_writer(to),
            )),
            Format::Jsonl => Self::Jsonl(BufWriter::with_capacity(1 << 16, to)),
        }
    }

    fn header(&mut self) -> Result<(), Failure> {
        match self {
            Self::Csv(csv) => csv.write_record(COLUMNS).map_err(csv_failed),
            Self::Jsonl(_) => Ok(()),
        }
    }

    /// Writes the rows of an hour in order of time and forgets them.
    fn hour(
        &mut self,
        point: &Point,
        book: &Book,
        readings: &mut Vec<Reading>,
    ) -> Result<(), Failure> {
        readings.sort_by_key(|reading| reading.at);
        readings
            .drain(..)
            .try_for_each(|reading| self.row(point, book, &reading))
    }

    fn row(&mut self, point: &Point, book: &Book, reading: &Reading) -> Result<(), Failure> {
        let probe = book
            .probe_at(&point.tag, reading.at)
            .map(|probe| probe.spec.id.0.as_str());
        match self {
            Self::Csv(csv) => {
                let figure = |figure: Option<f64>| {
                    figure.map(|figure| figure.to_string()).unwrap_or_default()
                };
                csv.write_record([
                    rfc3339_ms(reading.at).as_str(),
                    &point.tag.0,
                    &figure(reading.mv),
                    &figure(reading.temp_c),
                    &figure(reading.value),
                    &figure(reading.u),
                    &reading.flag.number().to_string(),
                    &reading.tests.to_string(),
                    probe.unwrap_or_default(),
                    &reading
                        .calibration
                        .map(|id| id.to_string())
                        .unwrap_or_default(),
                    "",
                    "",
                ])
                .map_err(csv_failed)
            }
            Self::Jsonl(to) => {
                let object = json!({
                    "time": rfc3339_ms(reading.at),
                    "point": point.tag,
                    "mv": reading.mv,
                    "temp_c": reading.temp_c,
                    "value": reading.value,
                    "u": reading.u,
                    "flag": reading.flag,
                    "tests": reading.tests.iter().map(Test::name).collect::<Vec<_>>(),
                    "probe": probe,
                    "calibration": reading.calibration,
                    "best": null,
                    "u_best": null,
                });
                writeln!(to, "{object}").map_err(|error| Failure::output(&error))
            }
        }
    }

    fn end(mut self) -> Result<Exit, Failure> {
        match &mut self {
            Self::Csv(csv) => csv.flush(),
            Self::Jsonl(to) => to.flush(),
        }
        .map_err(|error| Failure::output(&error))?;
        Ok(Exit::Done)
    }
}

fn csv_failed(error: csv::Error) -> Failure {
    match error.into_kind() {
        csv::ErrorKind::Io(error) => Failure::output(&error),
        other => Failure::world(format!("cannot write the output: {other:?}")),
    }
}
