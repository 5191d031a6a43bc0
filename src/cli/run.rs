//! # `halfcell run`: the daemon

use super::context::Context;
use super::exit::Exit;
use super::failure::{Failure, chain};
use super::log;
use crate::config::site::Site;
use crate::daemon::run::{DaemonError, Order, run as serve};
use sha2::{Digest as _, Sha256};
use std::sync::Arc;
use tokio::signal::unix::{SignalKind, signal};
use tokio::sync::mpsc;

/// Run the daemon: read every meter, judge, keep, until told to stop
///
/// SIGHUP takes up a changed configuration, SIGTERM and Ctrl-C end it in order. It logs on standard error; `HALFCELL_LOG=debug` says more.
#[derive(Debug, clap::Args)]
#[command(after_help = "Example:\n  halfcell run --config /etc/halfcell/halfcell.toml")]
pub(super) struct Args {}

pub(super) fn run(context: &Context, _args: &Args) -> Result<Exit, Failure> {
    let (site, digest) = load(context)?;
    log::begin();
    let runtime = runtime()?;
    runtime.block_on(async {
        let (orders, taken) = mpsc::channel(1);
        let until_stop = obey_signals(context.clone(), orders)?;
        let ended = serve(Arc::new(site), digest, taken).await;
        until_stop.abort();
        ended.map_err(|error| refused(&error))
    })?;
    Ok(Exit::Done)
}

/// One thread is enough: the lines wait far more than they work.
pub(super) fn runtime() -> Result<tokio::runtime::Runtime, Failure> {
    let built = tokio::runtime::Builder::new_current_thread()
        .enable_all()
        .build();
    built.map_err(|error| Failure::world(format!("the system gives no event loop: {error}")))
}

/// Why the daemon could not start, with what to do.
pub(super) fn refused(error: &DaemonError) -> Failure {
    let failure = Failure::world(chain(error));
    match error {
        DaemonError::Ledger { source, .. } => failure.remedy(source.remedy()),
        DaemonError::AlreadyRunning { .. } => failure.remedy("stop the other daemon first"),
        DaemonError::System { .. } => {
            failure.remedy("check the permissions of the ledger's folder")
        }
    }
}

/// The site as checked, and what its text hashes to.
fn load(context: &Context) -> Result<(Site, String), Failure> {
    let site = context.site_at_ledger()?;
    let text = std::fs::read(context.config_path())
        .map_err(|error| Failure::world(format!("cannot read the configuration: {error}")))?;
    Ok((site, sha256(&text)))
}

/// SHA-256 in hexadecimal.
pub(super) fn sha256(bytes: &[u8]) -> String {
    let digit = |n: u8| char::from_digit(u32::from(n), 16).unwrap_or('?');
    Sha256::digest(bytes)
        .iter()
        .flat_map(|byte| [digit(byte >> 4), digit(byte & 15)])
        .collect()
}

/// Turns signals into orders until the daemon ends.
fn obey_signals(
    context: Context,
    orders: mpsc::Sender<Order>,
) -> Result<tokio::task::JoinHandle<()>, Failure> {
    let catch = |kind| {
        signal(kind)
            .map_err(|error| Failure::world(format!("the system gives no signals: {error}")))
    };
    let mut hang_up = catch(SignalKind::hangup())?;
    let mut terminate = catch(SignalKind::terminate())?;
    let mut interrupt = catch(SignalKind::interrupt())?;
    Ok(tokio::spawn(async move {
        loop {
            let order = tokio::select! {
                _ = terminate.recv() => Order::Stop { why: "SIGTERM".to_owned() },
                _ = interrupt.recv() => Order::Stop { why: "Ctrl-C".to_owned() },
                _ = hang_up.recv() => match load(&context) {
                    Ok((site, config_sha256)) => Order::Reload { site: Arc::new(site), config_sha256 },
                    Err(failure) => {
                        tracing::error!(cause = %failure, "configuration not taken up, the one before stays");
                        continue;
                    }
                },
            };
            if orders.send(order).await.is_err() {
                return;
            }
        }
    }))
}
