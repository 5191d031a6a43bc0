//! # `audit`: has anything been changed, lost or damaged

use super::context::{Context, ledger_failed, open_reader, put};
use super::exit::Exit;
use super::failure::Failure;
use serde_json::json;

/// Check the hash chain and the database; says what is wrong and where
#[derive(Debug, clap::Args)]
#[command(after_help = "\
Exit code 1 when something is wrong. With --ledger it needs no configuration.

Example:
  halfcell audit
  halfcell audit --ledger /mnt/backup/sable-creek.db --json")]
pub(super) struct Args {}

pub(super) fn run(context: &Context, _: &Args) -> Result<Exit, Failure> {
    let path = match context.named_ledger() {
        Some(path) => path.to_owned(),
        None => context.site()?.ledger,
    };
    let reader = open_reader(&path)?;
    let found = reader.audit().map_err(|error| ledger_failed(&error))?;
    let breaks: Vec<String> = found.breaks.iter().map(ToString::to_string).collect();
    if context.json {
        context.put_json(&json!({
            "ledger": path,
            "sound": found.is_sound(),
            "events": found.n_events,
            "breaks": breaks,
            "damage": found.damage,
        }))?;
    } else if found.is_sound() {
        put(&format!(
            "sound: {} events, each chained to the one before\n",
            found.n_events
        ))?;
    }
    if found.is_sound() {
        return Ok(Exit::Done);
    }
    let wrong = [breaks, found.damage].concat();
    Err(
        Failure::no(format!("the ledger is not sound: {}", wrong.join("; ")))
            .at(path.display().to_string())
            .remedy("keep the file as it is, and compare it with a backup"),
    )
}
