//! # `status --storage`: how the ledger lies on its disk

use super::context::{Context, ledger_failed, put};
use super::exit::Exit;
use super::failure::Failure;
use crate::config::time::rfc3339_ms;
use crate::ledger::{LONG_LOG, Reader};
use serde_json::json;
use std::fmt::Write as _;

pub(super) fn show(context: &Context, reader: &Reader) -> Result<Exit, Failure> {
    let storage = reader.storage().map_err(|error| ledger_failed(&error))?;
    if context.json {
        return context.put_json(&json!({
            "bytes": storage.bytes,
            "log_bytes": storage.log_bytes,
            "free_bytes": storage.free_bytes,
            "growth_bytes_per_year": storage.growth_per_year,
            "days_until_full": storage.days_left(),
            "holders": storage.holders,
            "writer": storage.writer.as_ref().map(|(at, note)| json!({"at": rfc3339_ms(*at), "note": note})),
            "audit": storage.audit.as_ref().map(|(at, note)| json!({"at": rfc3339_ms(*at), "note": note})),
        }));
    }
    let mut text = format!(
        "file        {}, its log {}\n",
        size(storage.bytes),
        size(storage.log_bytes)
    );
    let growth = storage.growth_per_year.map_or_else(
        || "not known before an hour is sealed".to_owned(),
        |growth| format!("{:.1} MB a year", growth / 1e6),
    );
    let days = storage.days_left().map_or_else(String::new, |days| {
        format!(", full in {days:.0} days at this growth")
    });
    let writer = storage.writer.map_or_else(
        || "no note yet".to_owned(),
        |(at, note)| {
            format!(
                "commits took {:.1} ms (99 of 100: {:.1} ms), {} batches waited, {} readings dropped; noted {}",
                note.commit_ms_p50,
                note.commit_ms_p99,
                note.waiting,
                note.dropped,
                context.rfc3339(at)
            )
        },
    );
    let audit = storage.audit.map_or_else(
        || "none yet: run `halfcell audit`".to_owned(),
        |(at, note)| {
            format!(
                "sound {}: {} events, {} readings",
                context.rfc3339(at),
                note.events,
                note.readings
            )
        },
    );
    let lines = [
        ("growth", growth),
        ("disk", format!("{} free{days}", size(storage.free_bytes))),
        ("writer", writer),
        ("last audit", audit),
    ];
    for (name, what) in lines {
        // Writing to a string cannot fail.
        writeln!(text, "{name:<12}{what}").unwrap_or_default();
    }
    if storage.log_bytes > LONG_LOG {
        writeln!(
            text,
            "a reader keeps the log from being reset; open in: {}",
            storage.holders.join(", ")
        )
        .unwrap_or_default();
    }
    put(&text)
}

#[expect(clippy::cast_precision_loss, reason = "a figure to read")]
fn size(bytes: u64) -> String {
    format!("{:.1} MB", bytes as f64 / 1e6)
}
