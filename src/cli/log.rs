//! # The log: the machine's condition on standard error

use std::io::IsTerminal as _;
use tracing::level_filters::LevelFilter;
use tracing_subscriber::filter::Targets;
use tracing_subscriber::layer::SubscriberExt as _;
use tracing_subscriber::util::SubscriberInitExt as _;

/// Begins to log. `HALFCELL_LOG` takes `error`, `warn`, `info`, `debug`, `trace`, or targets like `halfcell::meters=debug`.
pub(super) fn begin() {
    let asked = std::env::var("HALFCELL_LOG")
        .ok()
        .and_then(|text| text.parse::<Targets>().ok());
    let targets = asked.unwrap_or_else(|| Targets::new().with_default(LevelFilter::INFO));
    let stderr = tracing_subscriber::fmt::layer()
        .with_writer(std::io::stderr)
        .with_ansi(std::io::stderr().is_terminal())
        .with_target(false);
    // Under systemd the journal stamps each line itself.
    let begun = if std::env::var_os("JOURNAL_STREAM").is_some() {
        tracing_subscriber::registry()
            .with(targets)
            .with(stderr.without_time())
            .try_init()
    } else {
        tracing_subscriber::registry()
            .with(targets)
            .with(stderr)
            .try_init()
    };
    // Only a second call fails, and then the first one's log stands.
    drop(begun);
}
