//! # `audit`: has anything been changed, lost or damaged

use super::context::{Context, ledger_failed, open_reader, put};
use super::exit::Exit;
use super::failure::Failure;
use crate::ledger::{AuditNote, Ledger};
use serde_json::json;

/// Check the hash chain and the database; says what is wrong and where
#[derive(Debug, clap::Args)]
#[command(after_help = "\
Exit code 1 when something is wrong. With --ledger it needs no configuration.
The anchor it prints stands for everything recorded up to now: keep it on paper or in a mail, and whoever rewrites the
ledger later, chain and all, is caught by --from-anchor.

Example:
  halfcell audit
  halfcell audit --from-anchor 5f1d0c3a9b7e4f60812233445566778899aabbccddeeff00112233445566aabb
  halfcell audit --ledger /mnt/backup/sable-creek.db --json")]
pub(super) struct Args {
    /// An anchor printed earlier
    #[arg(long, value_name = "HASH")]
    from_anchor: Option<String>,
}

pub(super) fn run(context: &Context, args: &Args) -> Result<Exit, Failure> {
    let path = match context.named_ledger() {
        Some(path) => path.to_owned(),
        None => context.site()?.ledger,
    };
    let reader = open_reader(&path)?;
    let found = reader
        .audit_from(args.from_anchor.as_deref())
        .map_err(|error| ledger_failed(&error))?;
    let breaks: Vec<String> = found.breaks.iter().map(ToString::to_string).collect();
    if context.json {
        context.put_json(&json!({
            "ledger": path,
            "sound": found.is_sound(),
            "events": found.n_events,
            "sealed": found.n_sealed,
            "readings": found.n_readings,
            "anchor": found.head,
            "from_anchor": found.anchor,
            "breaks": breaks,
            "damage": found.damage,
        }))?;
    } else if found.is_sound() {
        put(&format!(
            "sound: {} events, each chained to the one before; {} readings, {} sealed hours as they were sealed\n",
            found.n_events, found.n_readings, found.n_sealed
        ))?;
        if let Some(event) = found.anchor {
            put(&format!(
                "the anchor given is event {event}: nothing up to it was rewritten\n"
            ))?;
        }
        if let Some(head) = &found.head {
            put(&format!("anchor {head}\n"))?;
        }
    }
    if found.is_sound() {
        // For `status --storage`; who may only read, audits all the same.
        if context.named_ledger().is_none()
            && let Ok(mut ledger) = Ledger::open_existing(&path)
        {
            let note = AuditNote {
                events: found.n_events,
                readings: found.n_readings,
                anchor: found.head,
            };
            drop(ledger.note_audit(context.now, &note));
        }
        return Ok(Exit::Done);
    }
    let wrong = [breaks, found.damage].concat();
    Err(
        Failure::no(format!("the ledger is not sound: {}", wrong.join("; ")))
            .at(path.display().to_string())
            .remedy("keep the file as it is, and compare it with a backup"),
    )
}
