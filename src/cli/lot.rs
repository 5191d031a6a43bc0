//! # `lot`: bottle batches of buffers and ORP check solutions

use super::context::{Context, Who, put};
use super::exit::Exit;
use super::failure::Failure;
use super::figures;
use super::typed;
use crate::config::site::Site;
use crate::electrode::buffers::BufferKind;
use crate::electrode::history::{Book, Lot};
use crate::electrode::orp::CheckSolution;
use crate::ledger::event::Body;
use clap::Subcommand;
use serde_json::json;

/// Bottle batches of buffers and check solutions: add, list
#[derive(Debug, clap::Args)]
pub(super) struct Args {
    #[command(subcommand)]
    action: Action,
}

#[derive(Debug, Subcommand)]
enum Action {
    /// Take up a bottle batch
    #[command(after_help = "\
Example:
  halfcell lot add --kind phthalate --number L123 --expires 2027-06-30 --value 4.005@25 --value 4.002@20 --u 0.005
  halfcell lot add --kind zobell --number Z9 --expires 2027-01-31")]
    Add(Add),
    /// Every bottle batch
    #[command(after_help = "\
Example:
  halfcell lot list --json")]
    List,
}

#[derive(Debug, clap::Args)]
struct Add {
    /// A buffer kind, a check solution, or a word of your own when the bottle has values of its own
    #[arg(long, value_name = "KIND")]
    kind: String,
    /// The number on the bottle
    #[arg(long, value_name = "NUMBER")]
    number: String,
    /// Last day it may be used (a date), or the moment from which it may not (a time)
    #[arg(long, value_name = "D")]
    expires: Option<String>,
    /// When it was opened
    #[arg(long, value_name = "T", allow_hyphen_values = true)]
    opened: Option<String>,
    /// Certificate value and the temperature it holds at; may be repeated
    #[arg(long = "value", value_name = "VALUE@TEMP_C", value_parser = typed::certificate_value)]
    values: Vec<[f64; 2]>,
    /// Expanded uncertainty (k = 2) of the certificate
    #[arg(long, value_name = "U", value_parser = typed::uncertainty)]
    u: Option<f64>,
    /// Replace a lot of that number
    #[arg(long)]
    correct: bool,
    #[command(flatten)]
    who: Who,
}

pub(super) fn run(context: &Context, args: &Args) -> Result<Exit, Failure> {
    let site = context.site()?;
    match &args.action {
        Action::Add(add) => {
            let lot = checked(context, &site, add)?;
            let told = format!("lot `{}` ({}) added", lot.number, lot.kind);
            let event =
                context.record(&site, &add.who, |book, _| addition(book, lot, add.correct))?;
            context.recorded(&site, &event, &told)
        }
        Action::List => list(context, &site),
    }
}

/// What the bottle says, as a lot.
fn checked(context: &Context, site: &Site, add: &Add) -> Result<Lot, Failure> {
    let known = add.kind.parse::<BufferKind>().is_ok() || add.kind.parse::<CheckSolution>().is_ok();
    if add.kind.contains(',') || add.kind.trim().is_empty() || typed::figure(&add.kind).is_ok() {
        return Err(
            Failure::request(format!("`{}` is no kind of a buffer", add.kind)).remedy(format!(
                "write one of {}, or a word of your own with --value",
                kinds()
            )),
        );
    }
    if !known && add.values.is_empty() {
        return Err(Failure::request(format!(
            "unknown buffer `{}`, and the lot states no value",
            add.kind
        ))
        .remedy(format!(
            "write one of {}, or give the certificate's values with --value VALUE@TEMP_C",
            kinds()
        )));
    }
    if add.number.is_empty() || add.number.chars().any(|c| c == ',' || c.is_control()) {
        return Err(
            Failure::request(format!("`{}` is no lot number", add.number))
                .remedy("write the number on the bottle, without commas"),
        );
    }
    let mut values = add.values.clone();
    values.sort_by(|a, b| a[1].total_cmp(&b[1]));
    if let Some(twice) = values
        .windows(2)
        .find(|pair| (pair[0][1] - pair[1][1]).abs() < 1e-6)
    {
        return Err(
            Failure::request(format!("two values at {} °C", twice[0][1]))
                .at(format!("lot `{}`", add.number))
                .remedy("give one --value per temperature"),
        );
    }
    for [value, temp_c] in &values {
        super::standards::plausible(&add.kind, *value, *temp_c)?;
    }
    Ok(Lot {
        number: add.number.clone(),
        kind: add.kind.clone(),
        opened: add
            .opened
            .as_deref()
            .map(|t| context.past(site, t))
            .transpose()?,
        expires: add
            .expires
            .as_deref()
            .map(|d| context.end_of(site, d))
            .transpose()?,
        values,
        u: add.u,
    })
}

/// Every kind that has a table of its own.
pub(super) fn kinds() -> String {
    let names: Vec<&str> = BufferKind::ALL
        .iter()
        .map(|kind| kind.name())
        .chain(CheckSolution::ALL.iter().map(|kind| kind.name()))
        .collect();
    names.join(", ")
}

fn addition(book: &Book, lot: Lot, correct: bool) -> Result<Body, Failure> {
    match book.lot(&lot.number) {
        Some(there) if !correct => Err(Failure::request(format!(
            "lot `{}` ({}) is there already",
            lot.number, there.fact.kind
        ))
        .remedy("check the number on the bottle; `--correct` replaces what was entered")),
        None if correct => Err(
            Failure::request(format!("no lot `{}` to correct", lot.number))
                .remedy("leave `--correct` out"),
        ),
        _ => Ok(Body::LotAdded(lot)),
    }
}

fn list(context: &Context, site: &Site) -> Result<Exit, Failure> {
    let book = context.book(site)?;
    let now = context.now;
    if context.json {
        let lots: Vec<_> = book
            .lots()
            .map(|lot| {
                json!({
                    "number": lot.fact.number,
                    "kind": lot.fact.kind,
                    "opened": lot.fact.opened.map(|t| context.rfc3339(t)),
                    "expires": lot.fact.expires.map(|t| context.rfc3339(t)),
                    "expired": lot.fact.expires.is_some_and(|t| t <= now),
                    "values": lot.fact.values.iter().map(|[value, temp_c]| json!({"value": value, "temp_c": temp_c})).collect::<Vec<_>>(),
                    "u": lot.fact.u,
                })
            })
            .collect();
        return context.put_json(&json!({ "lots": lots }));
    }
    let nothing = || figures::NOTHING.to_owned();
    let rows: Vec<Vec<String>> = book
        .lots()
        .map(|lot| {
            let expires = match lot.fact.expires {
                Some(t) if t <= now => format!("expired {}", context.local(site, t)),
                Some(t) => context.local(site, t),
                None => nothing(),
            };
            let values: Vec<String> = lot
                .fact
                .values
                .iter()
                .map(|[value, temp_c]| format!("{value} at {temp_c} °C"))
                .collect();
            vec![
                lot.fact.number.clone(),
                lot.fact.kind.clone(),
                if values.is_empty() {
                    "table".to_owned()
                } else {
                    values.join(", ")
                },
                lot.fact.u.map_or_else(nothing, |u| format!("± {u}")),
                lot.fact
                    .opened
                    .map_or_else(nothing, |t| context.local(site, t)),
                expires,
            ]
        })
        .collect();
    if rows.is_empty() {
        return put(
            "no lots yet; add one with `halfcell lot add --kind phthalate --number L123`\n",
        );
    }
    put(&figures::table(
        &["LOT", "KIND", "VALUES", "U (k=2)", "OPENED", "NOT FROM"],
        rows,
        &[],
    ))
}
