//! # `halfcell demo`: the whole job on a simulated site
//!
//! History goes through the import's path, then live meters talk on real pseudo-terminals to the daemon itself.

use super::context::{Context, Who, ledger_failed, put};
use super::exit::Exit;
use super::failure::Failure;
use super::run as daemon;
use super::standards::{self, Asked, Expired};
use super::status::{self, Moment};
use super::typed::TypedBuffer;
use super::{calibrate, verify};
use crate::config;
use crate::config::site::Site;
use crate::daemon::clock;
use crate::daemon::run::{Order, run as serve};
use crate::electrode::history::Book;
use crate::electrode::units::Timestamp;
use crate::ledger::event::{Body, NewEvent};
use crate::ledger::{Ledger, Reader};
use crate::pipeline::{Arrival, Figure, Standing, read};
use crate::simulation::logbook::{Entered, Entry, InBeaker};
use crate::simulation::site::DemoSite;
use indicatif::{ProgressBar, ProgressStyle};
use std::io::{IsTerminal as _, Write as _};
use std::path::{Path, PathBuf};
use std::sync::Arc;
use std::time::Duration;
use tokio::sync::mpsc;

/// Run the whole job on a simulated site: history, then live meters behind pseudo-terminals
///
/// Six points on four serial lines: two ponds, a redundant raceway pair, a neutralisation tank, an ORP disinfection basin. One electrode
/// has worn out, one has lost its temperature sensor. Everything is invented. Ctrl-C ends it; ledger and configuration stay.
#[derive(Debug, clap::Args)]
#[command(after_help = "Example:\n  halfcell demo --days 3 --folder /tmp/my-demo")]
pub(super) struct Args {
    /// Days of history
    #[arg(long, default_value_t = 14, value_parser = clap::value_parser!(u32).range(1..=3650))]
    days: u32,
    /// Where ledger and configuration go (default: a new folder among the temporary files)
    #[arg(long, value_name = "FOLDER")]
    folder: Option<PathBuf>,
    /// End by itself after this many seconds of live readings
    #[arg(long, value_name = "SECONDS")]
    seconds: Option<u64>,
}

/// How often the status is shown.
const ON_TERMINAL: Duration = Duration::from_secs(2);
const AS_LINES: Duration = Duration::from_secs(10);

pub(super) fn run(context: &Context, args: &Args) -> Result<Exit, Failure> {
    let folder = make_folder(args, context.now)?;
    let demo = DemoSite::new(context.now, args.days);
    let ledger_path = folder.join("sable-creek.db");
    let config_path = folder.join("halfcell.toml");
    let text = demo.config_text(&folder, &ledger_path, Duration::from_millis(250));
    let write =
        |error| Failure::world(format!("cannot write `{}`: {error}", config_path.display()));
    std::fs::write(&config_path, &text).map_err(write)?;
    let site = config::load(&text).map_err(|errors| {
        Failure::world(format!(
            "the demo's configuration is wrong: {}",
            config::render("demo", &text, &errors)
        ))
    })?;
    let n_rows = history(&demo, &site, args.days, context.now)?;
    put(&format!(
        "{} days of history, {n_rows} readings. Live now; Ctrl-C ends it.\nFrom a second terminal:\n  export HALFCELL_CONFIG={}\n  halfcell status\n  halfcell calibrate --probe P-2101 --by \"your name\" --buffer phthalate,172.0,20.0 --buffer phosphate,4.0,20.0\n\n",
        args.days,
        config_path.display(),
    ))?;
    live(
        &demo,
        &site,
        &folder,
        daemon::sha256(text.as_bytes()),
        args.seconds,
    )?;
    put(&format!(
        "\nThe demo has ended; ledger and configuration stay in {}\nTry:\n  export HALFCELL_CONFIG={}\n  halfcell health\n  halfcell status --at -2h\n  halfcell export --point POND-2 --from -4d --to -2d --format csv | head\n",
        folder.display(),
        config_path.display(),
    ))
}

fn make_folder(args: &Args, now: Timestamp) -> Result<PathBuf, Failure> {
    let folder = args.folder.clone().unwrap_or_else(|| {
        std::env::temp_dir().join(format!(
            "halfcell-demo-{}-{}",
            now.ms() / 1_000,
            std::process::id()
        ))
    });
    let failed = |error| {
        Failure::world(format!(
            "cannot make folder `{}`: {error}",
            folder.display()
        ))
    };
    std::fs::create_dir_all(&folder).map_err(failed)?;
    if folder.join("sable-creek.db").exists() {
        return Err(Failure::request(format!(
            "folder `{}` holds a demo already",
            folder.display()
        ))
        .remedy("name another folder, or remove that one"));
    }
    std::path::absolute(&folder).map_err(failed)
}

/// The logbook as events and the meters' memory as readings, by the way every import takes.
fn history(demo: &DemoSite, site: &Site, days: u32, now: Timestamp) -> Result<u64, Failure> {
    let mut ledger = Ledger::open(&site.ledger).map_err(|e| ledger_failed(&e))?;
    let mut book = Book::default();
    let logbook = demo
        .logbook()
        .map_err(|e| Failure::world(format!("the demo's logbook is wrong: {e}")))?;
    for entry in logbook {
        let (at, by) = (entry.at, entry.by.to_owned());
        let body = body(site, &book, entry)?;
        let event = ledger
            .record(NewEvent {
                at,
                entered: at,
                by,
                body,
            })
            .map_err(|e| ledger_failed(&e))?;
        event.enter(&mut book);
    }
    let ids: Vec<_> = site
        .points
        .iter()
        .map(|p| ledger.point(&p.tag, p.quantity))
        .collect::<Result<_, _>>()
        .map_err(|e| ledger_failed(&e))?;
    let bar = ProgressBar::new(u64::from(days) * 1_440 * ids.len() as u64);
    if let Ok(style) = ProgressStyle::with_template("history {bar:40} {pos} of {len} readings") {
        bar.set_style(style);
    }
    let standing = Standing::new(Arc::new(book));
    let mut rows = Vec::with_capacity(CHUNK);
    let mut kept = 0;
    for row in demo.history() {
        let arrival = Arrival {
            at: row.at,
            mv: Figure::Number(row.shown.mv),
            temperature: Figure::Number(row.shown.temp_c),
        };
        rows.push((
            ids[row.point],
            read(&site.points[row.point], &standing, &arrival),
        ));
        if rows.len() == CHUNK {
            kept += ledger
                .import(&rows, now)
                .map_err(|e| ledger_failed(&e))?
                .kept;
            bar.set_position(kept);
            rows.clear();
        }
    }
    kept += ledger
        .import(&rows, now)
        .map_err(|e| ledger_failed(&e))?
        .kept;
    ledger.seal_all(now).map_err(|e| ledger_failed(&e))?;
    bar.finish_and_clear();
    Ok(kept)
}

/// Rows handed to the ledger at once.
const CHUNK: usize = 20_000;

/// What an entry of the logbook is as an event, by the way the commands take.
fn body(site: &Site, book: &Book, entry: Entry) -> Result<Body, Failure> {
    Ok(match entry.what {
        Entered::Lot(lot) => Body::LotAdded(lot),
        Entered::Probe(spec) => Body::ProbeAdded(spec),
        Entered::Placed { probe, point } => Body::ProbePlaced { probe, point },
        Entered::Grab(grab) => Body::Grab(grab),
        Entered::Hold(hold) => Body::Hold(hold),
        Entered::Calibration { probe, readings } => {
            let Some(probe) = book.probe(&probe) else {
                return Err(Failure::world(format!(
                    "the demo's logbook names no probe `{probe}` before"
                )));
            };
            let asked = Asked {
                site,
                book,
                probe: &probe.spec,
                at: entry.at,
                expired: Expired::Refused,
            };
            let readings = standards::readings(asked, &typed(&readings))?;
            Body::Calibration(calibrate::calibration(
                probe,
                probe.calibration_at(entry.at),
                readings,
                None,
            )?)
        }
        Entered::Verification {
            probe,
            stage,
            readings,
        } => {
            let who = Who { at: None, by: None };
            let checked = verify::Args {
                probe: probe.0,
                stage,
                buffers: typed(&readings),
                who,
            };
            verify::check(site, book, &checked, entry.at)?.0
        }
    })
}

fn typed(readings: &[InBeaker]) -> Vec<TypedBuffer> {
    let one = |r: &InBeaker| TypedBuffer {
        name: r.name.to_owned(),
        mv: r.mv,
        temp_c: r.temp_c,
        lot: Some(r.lot.to_owned()),
    };
    readings.iter().map(one).collect()
}

/// Meters behind pseudo-terminals, the daemon, and the status until Ctrl-C.
fn live(
    demo: &DemoSite,
    site: &Site,
    folder: &Path,
    digest: String,
    seconds: Option<u64>,
) -> Result<(), Failure> {
    let lines = demo
        .start_lines(folder, clock::now)
        .map_err(|error| Failure::world(format!("no simulated line: {error}")))?;
    let runtime = daemon::runtime()?;
    let ended = runtime.block_on(async {
        let (orders, taken) = mpsc::channel(1);
        let show = tokio::task::spawn(show_until_stopped(site.clone(), orders, seconds));
        let ended = serve(Arc::new(site.clone()), digest, taken).await;
        show.abort();
        ended.map_err(|error| daemon::refused(&error))
    });
    drop(lines);
    ended
}

async fn show_until_stopped(site: Site, orders: mpsc::Sender<Order>, seconds: Option<u64>) {
    let terminal = std::io::stdout().is_terminal();
    let mut again = tokio::time::interval(if terminal { ON_TERMINAL } else { AS_LINES });
    // The first look waits for the first live readings.
    again.reset_after(ON_TERMINAL);
    let limit = async {
        match seconds {
            Some(seconds) => tokio::time::sleep(Duration::from_secs(seconds)).await,
            None => std::future::pending().await,
        }
    };
    tokio::pin!(limit);
    let why = loop {
        tokio::select! {
            _ = tokio::signal::ctrl_c() => break "Ctrl-C",
            () = &mut limit => break "its time was up",
            _ = again.tick() => if show(&site, terminal).is_err() {
                break "nobody reads its output";
            },
        }
    };
    // The daemon may have ended by itself; then there is nobody to tell.
    drop(
        orders
            .send(Order::Stop {
                why: why.to_owned(),
            })
            .await,
    );
}

fn show(site: &Site, terminal: bool) -> std::io::Result<()> {
    let now = clock::now();
    let table = Reader::open(&site.ledger)
        .and_then(|reader| status::table(site, &reader, Moment::Now(now)));
    let text = table.unwrap_or_else(|error| format!("status not readable: {error}\n"));
    let mut out = std::io::stdout().lock();
    if terminal {
        // Home, then clear what is below each line as it is written over.
        write!(out, "\x1b[H\x1b[J{text}\nCtrl-C ends the demo.\n")?;
    } else {
        writeln!(out, "{text}")?;
    }
    out.flush()
}
