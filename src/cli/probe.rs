//! # `probe`: the electrodes and where they sit

use super::context::{Context, Who, put};
use super::exit::Exit;
use super::failure::Failure;
use super::figures;
use super::typed;
use crate::config::site::Site;
use crate::electrode::history::{Book, ProbeHistory, ProbeId, ProbeKind, ProbeSpec, Tag};
use crate::electrode::orp::ReferenceElectrode;
use crate::electrode::units::Timestamp;
use crate::ledger::event::Body;
use clap::Subcommand;
use serde_json::json;

/// Electrodes: add, place, retire, list
#[derive(Debug, clap::Args)]
pub(super) struct Args {
    #[command(subcommand)]
    action: Action,
}

#[derive(Debug, Subcommand)]
enum Action {
    /// Take up a new electrode
    #[command(after_help = "\
Example:
  halfcell probe add P-1042 --kind ph --serial A1234 --by 'M. Oake'
  halfcell probe add R-7 --kind orp --reference agcl-3m")]
    Add {
        /// The name you give it, unique for good
        id: String,
        /// Glass (ph) or metal (orp)
        #[arg(long, value_name = "ph|orp")]
        kind: ProbeKind,
        /// Its reference electrode
        #[arg(long, value_name = "REFERENCE", default_value = "agcl-unknown")]
        reference: ReferenceElectrode,
        /// pH at which its potential does not depend on temperature
        #[arg(long, value_name = "PH", default_value = "7.00", value_parser = typed::figure)]
        ph_iso: f64,
        /// The maker's serial number
        #[arg(long, value_name = "S")]
        serial: Option<String>,
        #[command(flatten)]
        who: Who,
    },
    /// Put an electrode into the liquid of a point; whatever sat there is out
    #[command(after_help = "\
Example:
  halfcell probe place P-1042 --point POND-3 --at '2026-03-02 09:10'")]
    Place {
        /// The electrode
        id: String,
        /// The point
        #[arg(long, value_name = "TAG")]
        point: String,
        #[command(flatten)]
        who: Who,
    },
    /// Take an electrode out of service for good
    #[command(after_help = "\
Example:
  halfcell probe retire P-1042 --by 'M. Oake'")]
    Retire {
        /// The electrode
        id: String,
        #[command(flatten)]
        who: Who,
    },
    /// Every electrode and where it sits
    #[command(after_help = "\
Example:
  halfcell probe list --json")]
    List,
}

pub(super) fn run(context: &Context, args: &Args) -> Result<Exit, Failure> {
    let site = context.site()?;
    match &args.action {
        Action::Add {
            id,
            kind,
            reference,
            ph_iso,
            serial,
            who,
        } => {
            let spec = ProbeSpec {
                id: named(id)?,
                kind: *kind,
                reference: *reference,
                ph_iso: sensible_ph_iso(*ph_iso)?,
                serial: serial.clone(),
            };
            let event = context.record(&site, who, |book, _| addition(book, spec))?;
            context.recorded(&site, &event, &format!("probe `{id}` ({kind}) added"))
        }
        Action::Place { id, point, who } => {
            let event = context.record(&site, who, |book, at| {
                placement(&site, book, (id, point), at)
            })?;
            context.recorded(&site, &event, &format!("probe `{id}` placed at `{point}`"))
        }
        Action::Retire { id, who } => {
            let event = context.record(&site, who, |book, at| {
                let probe = in_service(book, id, at)?;
                Ok(Body::ProbeRetired {
                    probe: probe.spec.id.clone(),
                })
            })?;
            context.recorded(&site, &event, &format!("probe `{id}` retired"))
        }
        Action::List => list(context, &site),
    }
}

/// A name that can be typed again and stands in one field of a file.
fn named(id: &str) -> Result<ProbeId, Failure> {
    let plain = !id.is_empty()
        && id.len() <= 64
        && !id
            .chars()
            .any(|c| c.is_whitespace() || c.is_control() || c == ',' || c == ';');
    if plain {
        Ok(ProbeId::from(id))
    } else {
        Err(Failure::request(format!("`{id}` is no name for a probe"))
            .remedy("write up to 64 characters without spaces, commas and semicolons"))
    }
}

fn sensible_ph_iso(ph_iso: f64) -> Result<f64, Failure> {
    if (0.0..=14.0).contains(&ph_iso) {
        Ok(ph_iso)
    } else {
        Err(
            Failure::request(format!("an isopotential pH of {ph_iso} is outside 0 to 14"))
                .remedy("leave `--ph-iso` out unless the maker states it; it is 7.00 then"),
        )
    }
}

fn addition(book: &Book, spec: ProbeSpec) -> Result<Body, Failure> {
    match book.probe(&spec.id) {
        None => Ok(Body::ProbeAdded(spec)),
        Some(there) => Err(Failure::request(format!(
            "probe `{}` is there already ({}{})",
            spec.id,
            there.spec.kind,
            there
                .spec
                .serial
                .as_ref()
                .map(|serial| format!(", serial {serial}"))
                .unwrap_or_default()
        ))
        .remedy("give the new electrode a name of its own; a name is never used again")),
    }
}

fn placement(
    site: &Site,
    book: &Book,
    (id, tag): (&str, &str),
    at: Timestamp,
) -> Result<Body, Failure> {
    let probe = in_service(book, id, at)?;
    let point = super::context::point(site, tag)?;
    if point.quantity != probe.spec.kind {
        return Err(Failure::request(format!(
            "probe `{id}` measures {} and point `{tag}` {}",
            probe.spec.kind, point.quantity
        ))
        .remedy(format!(
            "place an electrode of kind {} there",
            point.quantity
        )));
    }
    let point = Tag::from(tag);
    if book
        .probe_at(&point, at)
        .is_some_and(|there| there.spec.id == probe.spec.id)
    {
        return Err(
            Failure::request(format!("probe `{id}` sits at `{tag}` already at that time"))
                .remedy("leave it as it is, or give the right `--at`"),
        );
    }
    Ok(Body::ProbePlaced {
        probe: probe.spec.id.clone(),
        point,
    })
}

/// The probe, known at `at` and not retired.
pub(super) fn in_service<'a>(
    book: &'a Book,
    id: &str,
    at: Timestamp,
) -> Result<&'a ProbeHistory, Failure> {
    let Some(probe) = book.probe(&ProbeId::from(id)) else {
        let known: Vec<&str> = book
            .probes()
            .map(|probe| probe.spec.id.0.as_str())
            .collect();
        return Err(
            Failure::request(format!("no probe `{id}`")).remedy(if known.is_empty() {
                format!("add it first: `halfcell probe add {id} --kind ph`")
            } else {
                format!(
                    "name one of {}, or add it with `halfcell probe add`",
                    known.join(", ")
                )
            }),
        );
    };
    if probe.retired_at(at) {
        return Err(
            Failure::request(format!("probe `{id}` is retired at that time"))
                .remedy("name an electrode in service; `halfcell probe list` shows them"),
        );
    }
    Ok(probe)
}

fn list(context: &Context, site: &Site) -> Result<Exit, Failure> {
    let book = context.book(site)?;
    let now = context.now;
    if context.json {
        let probes: Vec<_> = book
            .probes()
            .map(|probe| {
                json!({
                    "probe": probe.spec.id,
                    "kind": probe.spec.kind,
                    "reference": probe.spec.reference,
                    "ph_iso": probe.spec.ph_iso,
                    "serial": probe.spec.serial,
                    "added": context.rfc3339(probe.added),
                    "point": sits_at(&book, probe, now),
                    "since": since(probe, now).map(|t| context.rfc3339(t)),
                    "retired": probe.retired_at(now),
                })
            })
            .collect();
        return context.put_json(&json!({ "probes": probes }));
    }
    let rows: Vec<Vec<String>> = book
        .probes()
        .map(|probe| {
            let place = if probe.retired_at(now) {
                "retired".to_owned()
            } else {
                sits_at(&book, probe, now)
                    .map_or_else(|| figures::NOTHING.to_owned(), ToString::to_string)
            };
            vec![
                probe.spec.id.to_string(),
                probe.spec.kind.to_string(),
                probe.spec.reference.to_string(),
                probe
                    .spec
                    .serial
                    .clone()
                    .unwrap_or_else(|| figures::NOTHING.to_owned()),
                place,
                since(probe, now)
                    .map_or_else(|| figures::NOTHING.to_owned(), |t| context.local(site, t)),
            ]
        })
        .collect();
    if rows.is_empty() {
        return put("no probes yet; add one with `halfcell probe add ID --kind ph`\n");
    }
    put(&figures::table(
        &["PROBE", "KIND", "REFERENCE", "SERIAL", "POINT", "SINCE"],
        rows,
        &[],
    ))
}

/// Where the probe sits at `t`, if nothing else has been put there since.
pub(super) fn sits_at<'a>(book: &Book, probe: &'a ProbeHistory, t: Timestamp) -> Option<&'a Tag> {
    probe.point_at(t).filter(|point| {
        book.probe_at(point, t)
            .is_some_and(|there| there.spec.id == probe.spec.id)
    })
}

fn since(probe: &ProbeHistory, t: Timestamp) -> Option<Timestamp> {
    probe.moves.iter().rev().find(|m| m.at <= t).map(|m| m.at)
}
