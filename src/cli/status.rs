//! # `status`: every point now

use super::ahead::{self, Learnt};
use super::context::{Context, put};
use super::derived;
use super::exit::Exit;
use super::failure::Failure;
use super::figures::{self, NOTHING};
use super::storage;
use crate::config::site::{Point, Site};
use crate::config::time;
use crate::electrode::convert::Converted;
use crate::electrode::history::{Book, ProbeHistory, ProbeKind, Tag};
use crate::electrode::orp;
use crate::electrode::units::{Celsius, Timestamp};
use crate::ledger::{LedgerError, PointId, Reader};
use crate::watch::condition::{Evidence, condition};
use crate::watch::reading::Reading;
use crate::watch::status::Status;
use serde_json::{Value, json};

/// Every point now: value ± u, age, band, flag, probe, its status, calibrate-by
#[derive(Debug, clap::Args)]
#[command(after_help = "\
A value older than three logging intervals (a minute at least) is called stale.

Example:
  halfcell status
  halfcell status --storage
  halfcell status --lines
  halfcell status --at '2026-03-02 09:14' --json")]
pub(super) struct Args {
    /// What was known then
    #[arg(long, value_name = "T", allow_hyphen_values = true)]
    at: Option<String>,
    /// Instead: how the ledger lies on its disk, and how the writer and the last audit did
    #[arg(long, conflicts_with_all = ["at", "lines"])]
    storage: bool,
    /// The serial lines instead: what was heard, thrown away and why, timeouts, latency
    #[arg(long, conflicts_with = "at")]
    lines: bool,
}

pub(super) fn run(context: &Context, args: &Args) -> Result<Exit, Failure> {
    let site = context.site()?;
    if args.lines {
        return super::lines::run(context, &site);
    }
    let moment = Moment::asked(context, &site, args.at.as_deref())?;
    let reader = context.reader(&site)?;
    if args.storage {
        return storage::show(context, &reader);
    }
    let failed = |error: LedgerError| super::context::ledger_failed(&error);
    if context.json {
        let book = reader.book(None).map_err(failed)?;
        let rows = rows(&site, &reader, &book, moment).map_err(failed)?;
        let points: Vec<Value> = rows.iter().map(object).collect();
        return context.put_json(&json!({
            "site": site.name,
            "time": time::rfc3339_ms(moment.at()),
            "points": points,
        }));
    }
    put(&table(&site, &reader, moment).map_err(failed)?)
}

/// The moment a status is of.
#[derive(Debug, Clone, Copy)]
pub(super) enum Moment {
    /// The present: what arrived last counts, even when the clock stepped back.
    Now(Timestamp),
    /// Another: what was known then.
    Then(Timestamp),
}

impl Moment {
    /// As asked for with `--at`.
    pub(super) fn asked(context: &Context, site: &Site, at: Option<&str>) -> Result<Self, Failure> {
        at.map_or(Ok(Self::Now(context.now)), |text| {
            context.past(site, text).map(Self::Then)
        })
    }

    /// Its time.
    pub(super) const fn at(self) -> Timestamp {
        let (Self::Now(at) | Self::Then(at)) = self;
        at
    }

    /// The newest reading of a point then, if it has any.
    pub(super) fn newest(
        self,
        reader: &Reader,
        points: &[(Tag, PointId)],
        tag: &Tag,
    ) -> Result<Option<Newest>, LedgerError> {
        let Some((_, id)) = points.iter().find(|(known, _)| known == tag) else {
            return Ok(None);
        };
        let until = match self {
            Self::Now(_) => None,
            Self::Then(at) => Some(at),
        };
        let Some((_, reading)) = reader.newest(*id, until)? else {
            return Ok(None);
        };
        let before = reader.newest(*id, Some(reading.at.plus_ms(-1)))?;
        let spacing_ms = before.map_or(0, |(_, before)| reading.at.ms() - before.at.ms());
        Ok(Some(Newest {
            reading,
            spacing_ms,
        }))
    }
}

/// The newest reading of a point, and how long after the one before it came.
#[derive(Debug, Clone, Copy)]
pub(super) struct Newest {
    pub(super) reading: Reading,
    spacing_ms: i64,
}

/// Readings farther apart than this are not a rhythm but a gap, ms.
const SLOWEST_RHYTHM_MS: i64 = 900_000;

impl Newest {
    /// Whether it is too old to speak for `at`: three logging intervals, or three of the rhythm it came in, a minute at least.
    pub(super) fn stale(&self, point: &Point, at: Timestamp) -> bool {
        let rhythm_ms = if self.spacing_ms <= SLOWEST_RHYTHM_MS {
            self.spacing_ms
        } else {
            0
        };
        let limit_ms = figures::ms(point.every)
            .max(rhythm_ms)
            .saturating_mul(3)
            .max(60_000);
        at.ms().saturating_sub(self.reading.at.ms()) > limit_ms
    }
}

/// Columns of a terminal below which the table leaves something out.
const NARROW: u16 = 110;

/// The status table as text.
pub(super) fn table(site: &Site, reader: &Reader, moment: Moment) -> Result<String, LedgerError> {
    let book = reader.book(None)?;
    let at = moment.at();
    let rows = rows(site, reader, &book, moment)?;
    let mut text = format!(
        "{}, {}\n\n",
        site.name,
        time::local_with_zone(at, site.timezone)
    );
    let mut header = vec![
        "POINT",
        "VALUE",
        "TEMP",
        "AGE",
        "BAND",
        "FLAG",
        "PROBE",
        "STATUS",
        "CALIBRATE BY",
    ];
    let mut body: Vec<_> = rows.iter().map(|row| cells(site, row, at)).collect();
    // What a narrow terminal can spare: the limits stand in the configuration, the temperature in a wider one.
    if figures::terminal_columns().is_some_and(|columns| columns < NARROW) {
        for spared in ["BAND", "TEMP"] {
            if let Some(place) = header.iter().position(|name| *name == spared) {
                header.remove(place);
                for cells in &mut body {
                    cells.remove(place);
                }
            }
        }
    }
    text.push_str(&figures::table(&header, body, &[]));
    let derived: String = rows
        .iter()
        .flat_map(|row| row.derived.iter().map(|figure| figure.line(row.point)))
        .collect();
    if !derived.is_empty() {
        text.push('\n');
        text.push_str(&derived);
    }
    let reasons: Vec<String> = rows.iter().filter_map(reasons).collect();
    if !reasons.is_empty() {
        text.push('\n');
        text.push_str(&reasons.concat());
    }
    Ok(text)
}

/// Why the probe of a point is not good, as a line.
fn reasons(row: &Row<'_>) -> Option<String> {
    let (probe, (status, why)) = row.probe.zip(row.condition.as_ref())?;
    let (tag, id) = (&row.point.tag, &probe.spec.id);
    (!why.is_empty()).then(|| format!("{tag} {id}: {status}: {}\n", why.join("; ")))
}

/// What is known of a point at a moment.
struct Row<'a> {
    point: &'a Point,
    reading: Option<Reading>,
    stale: bool,
    eh: Option<Converted>,
    probe: Option<&'a ProbeHistory>,
    condition: Option<(Status, Vec<String>)>,
    calibrate_by: Option<Timestamp>,
    /// Ammonia and carbon dioxide, where the water is described; of a fresh reading only.
    derived: Vec<derived::Figure>,
}

fn rows<'a>(
    site: &'a Site,
    reader: &Reader,
    book: &'a Book,
    moment: Moment,
) -> Result<Vec<Row<'a>>, LedgerError> {
    let at = moment.at();
    let points = reader.points()?;
    let learnt = Learnt::from(book, at);
    site.points
        .iter()
        .map(|point| {
            let newest = moment.newest(reader, &points, &point.tag)?;
            let reading = newest.map(|newest| newest.reading);
            let probe = book.probe_at(&point.tag, at);
            let stale = newest.is_some_and(|newest| newest.stale(point, at));
            let condition = probe.map(|probe| {
                condition(&Evidence {
                    at,
                    probe,
                    reading: reading.as_ref(),
                    stale,
                    on_hold: book.hold_at(&point.tag, at).is_some(),
                    tolerance: point.tolerance,
                })
            });
            let calibrate_by = probe.and_then(|probe| {
                let track = learnt.track(probe)?;
                ahead::look(&track, probe, (Some(point), reading.as_ref()), at).calibrate_by
            });
            Ok(Row {
                point,
                stale,
                eh: probe
                    .zip(reading)
                    .and_then(|(probe, reading)| eh(point, probe, &reading)),
                reading,
                probe,
                condition,
                calibrate_by: calibrate_by.map(|when| when.by),
                derived: reading
                    .filter(|_| !stale)
                    .map_or_else(Vec::new, |reading| derived::figures_of(point, &reading)),
            })
        })
        .collect()
}

/// Against the standard hydrogen electrode, for an ORP reading that has a value and a temperature.
fn eh(point: &Point, probe: &ProbeHistory, reading: &Reading) -> Option<Converted> {
    if point.quantity != ProbeKind::Orp {
        return None;
    }
    let orp = Converted {
        value: reading.value?,
        u: reading.u?,
    };
    let t = Celsius::new(reading.temp_c?).ok()?;
    orp::eh(orp, probe.spec.reference, t, point.u_temp_c).ok()
}

fn cells(site: &Site, row: &Row<'_>, at: Timestamp) -> Vec<String> {
    let kind = row.point.quantity;
    let nothing = || NOTHING.to_owned();
    let (value, temp, age, flag) = match &row.reading {
        None => ("no reading yet".to_owned(), nothing(), nothing(), nothing()),
        Some(reading) => {
            let value = match (reading.value, row.eh) {
                (None, _) => "no value".to_owned(),
                (Some(value), None) => figures::value(kind, value, reading.u),
                (Some(value), Some(eh)) => format!(
                    "{} (Eh {})",
                    figures::value(kind, value, reading.u),
                    figures::with_u(eh.value, eh.u, "mV")
                ),
            };
            let value = if row.stale {
                format!("stale: {value}")
            } else {
                value
            };
            let flag = if reading.tests.is_empty() {
                reading.flag.to_string()
            } else {
                format!("{} ({})", reading.flag, reading.tests)
            };
            let temp = reading
                .temp_c
                .map_or_else(nothing, |c| format!("{c:.1} °C"));
            (value, temp, figures::age(reading.at, at), flag)
        }
    };
    vec![
        row.point.tag.to_string(),
        value,
        temp,
        age,
        band(row.point),
        flag,
        row.probe
            .map_or_else(|| "no probe".to_owned(), |probe| probe.spec.id.to_string()),
        row.condition
            .as_ref()
            .map_or_else(nothing, |(status, _)| status.to_string()),
        row.calibrate_by.map_or_else(nothing, |by| {
            let day = time::local(by, site.timezone);
            let day = day.split(' ').next().unwrap_or_default().to_owned();
            if by <= at { format!("{day}, due") } else { day }
        }),
    ]
}

/// The alarm limits nearest to where the value should be: `6.8 to 8.6 pH`.
fn band(point: &Point) -> String {
    let Some(alarm) = point.alarm else {
        return NOTHING.to_owned();
    };
    let unit = figures::unit(point.quantity);
    match (alarm.low.or(alarm.low_low), alarm.high.or(alarm.high_high)) {
        (Some(low), Some(high)) => format!("{low} to {high} {unit}"),
        (Some(low), None) => format!("above {low} {unit}"),
        (None, Some(high)) => format!("below {high} {unit}"),
        (None, None) => NOTHING.to_owned(),
    }
}

fn object(row: &Row<'_>) -> Value {
    let reading = row.reading.as_ref();
    let mut object = json!({
        "tag": row.point.tag,
        "quantity": row.point.quantity,
        "time": reading.map(|reading| time::rfc3339_ms(reading.at)),
        "mv": reading.and_then(|reading| reading.mv),
        "temp_c": reading.and_then(|reading| reading.temp_c),
        "value": reading.and_then(|reading| reading.value),
        "u": reading.and_then(|reading| reading.u),
        "unit": figures::unit(row.point.quantity),
        "flag": reading.map(|reading| reading.flag),
        "stale": row.stale,
        "probe": row.probe.map(|probe| &probe.spec.id),
        "calibration": reading.and_then(|reading| reading.calibration),
        "probe_status": row.condition.as_ref().map(|(status, _)| status),
        "calibrate_by": row.calibrate_by.map(time::rfc3339_ms),
        "alarm": null,
    });
    for figure in &row.derived {
        object[figure.key] = figure.object();
    }
    if row.point.quantity == ProbeKind::Orp {
        object["eh"] = json!(row.eh.map(|eh| eh.value));
    }
    object
}
