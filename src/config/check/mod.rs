//! # From the file as written to a site that cannot be wrong
//!
//! One file per kind of table. Tables are read in the order lines, meters, points, whatever their order in the file;
//! what points at something faulty is not blamed for it.

mod band;
mod line;
mod meter;
mod point;
mod signal;
mod temperature;

use super::keys;
use super::near::nearest;
use super::problem::{ConfigError, Problems};
use super::raw::{Table, Value};
use super::site::Site;
use chrono_tz::{TZ_VARIANTS, Tz};
use std::collections::HashMap;
use std::ops::Range;
use std::path::PathBuf;
use std::time::Duration;
use toml::de::DeTable;

/// A site from the text of its configuration.
///
/// # Errors
/// Everything that is wrong with it, in the order of the file; never an empty list.
pub fn load(text: &str) -> Result<Site, Vec<ConfigError>> {
    let (root, syntax) = DeTable::parse_recoverable(text);
    let mut problems = Problems::new(text);
    for error in &syntax {
        problems.syntax(error);
    }
    let root = Table::root(&root, &keys::ROOT, &mut problems);
    let site = site(&root, &mut problems);
    match (site, problems.finish()) {
        (Some(site), errors) if errors.is_empty() => Ok(site),
        (_, errors) => Err(errors),
    }
}

fn site(root: &Table<'_>, problems: &mut Problems<'_>) -> Option<Site> {
    let head = root
        .need("site", problems)
        .and_then(|site| site.table(&keys::SITE, problems))
        .map(|table| head(&table, problems));
    let tables = |key, keys, problems: &mut Problems<'_>| match root.need(key, problems) {
        Some(list) => list.tables(keys, problems),
        None => Vec::new(),
    };
    let line_tables = tables("line", &keys::LINE, problems);
    let meter_tables = tables("meter", &keys::METER, problems);
    let point_tables = tables("point", &keys::POINT, problems);
    let lines = line::lines(&line_tables, problems);
    let meters = meter::meters(&meter_tables, &lines, problems);
    let points = point::points(&point_tables, &meters, problems);
    let (name, timezone, ledger, commit_window) = head?;
    Some(Site {
        name: name?,
        timezone: timezone?,
        ledger: ledger?,
        commit_window: commit_window?,
        lines: lines
            .into_iter()
            .map(|line| line.line)
            .collect::<Option<_>>()?,
        meters: meters
            .into_iter()
            .map(|meter| meter.meter)
            .collect::<Option<_>>()?,
        points: points?,
    })
}

type Head = (
    Option<String>,
    Option<Tz>,
    Option<PathBuf>,
    Option<Duration>,
);

fn head(table: &Table<'_>, problems: &mut Problems<'_>) -> Head {
    let mut name = |key| Some(table.need(key, problems)?.name(problems)?.to_owned());
    let site = name("name");
    let ledger = name("ledger").map(PathBuf::from);
    let zone = table
        .need("timezone", problems)
        .and_then(|value| timezone(&value, problems));
    let range = Duration::from_millis(250)..=Duration::from_mins(1);
    let window = match table.find("commit_window") {
        Some(value) => value.duration_in(range, problems),
        None => Some(Duration::from_secs(1)),
    };
    (site, zone, ledger, window)
}

fn timezone(value: &Value<'_>, problems: &mut Problems<'_>) -> Option<Tz> {
    let text = value.text(problems)?;
    if let Ok(zone) = text.parse() {
        return Some(zone);
    }
    let names = || TZ_VARIANTS.iter().map(|zone| zone.name());
    let city = |name: &'static str| name.rsplit('/').next().unwrap_or(name);
    let by_city = || {
        nearest(text, names().map(city)).and_then(|near| names().find(|name| city(name) == near))
    };
    let instead = match nearest(text, names()).or_else(by_city) {
        Some(near) => format!("did you mean `{near}`?"),
        None => "write a name of the zone database, such as `America/Halifax` or `UTC`".to_owned(),
    };
    value.refuse(problems, &format!("`{text}` is no time zone"), &instead);
    None
}

/// Names that may stand only once, each with its place.
#[derive(Debug, Default)]
struct Once {
    seen: HashMap<String, Range<usize>>,
}

impl Once {
    /// Notes a name and refuses it when it has been used before.
    fn take(&mut self, name: &str, value: &Value<'_>, instead: &str, problems: &mut Problems<'_>) {
        if let Some(first) = self.seen.get(name) {
            let line = problems.line_of(first);
            let problem = format!("{} is already taken on line {line}", value.shown());
            value.refuse(problems, &problem, instead);
        } else {
            self.seen.insert(name.to_owned(), value.span.clone());
        }
    }
}

/// The value of a key that may be left out, checked if it is there: `None` when it is there and wrong.
fn or<'a, T>(
    table: &Table<'a>,
    key: &'static str,
    otherwise: T,
    read: impl FnOnce(Value<'a>) -> Option<T>,
) -> Option<T> {
    match table.find(key) {
        Some(value) => read(value),
        None => Some(otherwise),
    }
}

#[cfg(test)]
mod tests;
