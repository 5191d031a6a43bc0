//! # What every command shares: the site, the ledger, the present moment, who is asking

use super::exit::Exit;
use super::failure::{Failure, chain};
use super::figures;
use crate::config::site::{Point, Site};
use crate::config::{self, ConfigError, time};
use crate::daemon::clock;
use crate::electrode::history::Book;
use crate::electrode::units::Timestamp;
use crate::ledger::event::{Body, Event, NewEvent};
use crate::ledger::{Ledger, LedgerError, Reader};
use serde_json::json;
use std::io::{ErrorKind, IsTerminal as _, Write as _};
use std::path::{Path, PathBuf};

/// The options that stand before or after every command, and the moment it was given.
#[derive(Debug, Clone)]
pub(super) struct Context {
    config: PathBuf,
    ledger: Option<PathBuf>,
    /// Print data as JSON.
    pub(super) json: bool,
    /// When the command was given.
    pub(super) now: Timestamp,
}

/// When something was so, when it is entered, and by whom.
#[derive(Debug)]
pub(super) struct Entry {
    at: Timestamp,
    entered: Timestamp,
    by: String,
}

impl Entry {
    /// As an event to be recorded.
    pub(super) fn event(self, body: Body) -> NewEvent {
        NewEvent {
            at: self.at,
            entered: self.entered,
            by: self.by,
            body,
        }
    }
}

/// When something was so, and who says it.
#[derive(Debug, clap::Args)]
pub(super) struct Who {
    /// When it was so, unless now; backdating is marked
    #[arg(long, value_name = "T", allow_hyphen_values = true)]
    pub(super) at: Option<String>,
    /// Who says so (default: the login name)
    #[arg(long, value_name = "NAME")]
    pub(super) by: Option<String>,
}

impl Context {
    /// With the clock read once, so that a command has one present.
    pub(super) fn new(config: PathBuf, ledger: Option<PathBuf>, json: bool) -> Self {
        Self {
            config,
            ledger,
            json,
            now: clock::now(),
        }
    }

    /// The configuration's file.
    pub(super) fn config_path(&self) -> &Path {
        &self.config
    }

    /// The site of the configuration; what is wrong with it is shown place by place.
    pub(super) fn site(&self) -> Result<Site, Failure> {
        let text = read_config(&self.config)?;
        config::load(&text).map_err(|errors| misconfigured(&self.config, &text, &errors))
    }

    /// The site, writing where `--ledger` says when it was given.
    pub(super) fn site_at_ledger(&self) -> Result<Site, Failure> {
        let mut site = self.site()?;
        if let Some(path) = &self.ledger {
            site.ledger.clone_from(path);
        }
        Ok(site)
    }

    /// The ledger's file.
    pub(super) fn ledger_path<'a>(&'a self, site: &'a Site) -> &'a Path {
        self.ledger.as_deref().unwrap_or(&site.ledger)
    }

    /// Where `--ledger` points, when it was given.
    pub(super) fn named_ledger(&self) -> Option<&Path> {
        self.ledger.as_deref()
    }

    /// The ledger, to read.
    pub(super) fn reader(&self, site: &Site) -> Result<Reader, Failure> {
        open_reader(self.ledger_path(site))
    }

    /// The ledger, to write; made when it is not there yet.
    pub(super) fn writer(&self, site: &Site) -> Result<Ledger, Failure> {
        Ledger::open(self.ledger_path(site)).map_err(|error| ledger_failed(&error))
    }

    /// The book of electrodes; empty when there is no ledger yet.
    pub(super) fn book(&self, site: &Site) -> Result<Book, Failure> {
        self.reader(site)?
            .book(None)
            .map_err(|error| ledger_failed(&error))
    }

    /// When and by whom something is recorded, as typed.
    pub(super) fn entry(&self, site: &Site, who: &Who) -> Result<Entry, Failure> {
        Ok(Entry {
            at: match &who.at {
                Some(text) => self.past(site, text)?,
                None => self.now,
            },
            entered: self.now,
            by: operator(who.by.as_deref())?,
        })
    }

    /// Records one event, checked against the book in the same transaction.
    pub(super) fn record(
        &self,
        site: &Site,
        who: &Who,
        check: impl FnOnce(&Book, Timestamp) -> Result<Body, Failure>,
    ) -> Result<Event, Failure> {
        let entry = self.entry(site, who)?;
        self.writer(site)?
            .record_checked(|book| check(book, entry.at).map(|body| entry.event(body)))
            .map_err(|error| ledger_failed(&error))?
    }

    /// Says something on standard error, quietly when nobody reads there.
    #[expect(clippy::unused_self, reason = "reads as the context's way to talk")]
    pub(super) fn say(&self, text: &str) {
        drop(writeln!(std::io::stderr().lock(), "{text}"));
    }

    /// Tells that an event was recorded, and when it was backdated.
    pub(super) fn recorded(&self, site: &Site, event: &Event, what: &str) -> Result<Exit, Failure> {
        if self.json {
            return self.put_json(&json!({
                "event": event.id,
                "at": self.rfc3339(event.at),
                "entered": self.rfc3339(event.entered),
                "by": event.by,
                "fact": event.body,
            }));
        }
        put(&format!("{what}\n  {}\n", self.dated(site, event)))
    }

    /// `event 12, 2026-03-02 09:14, by M. Oake`, and when it was entered if that is another time.
    pub(super) fn dated(&self, site: &Site, event: &Event) -> String {
        let backdated = if event.at == event.entered {
            String::new()
        } else {
            format!(", backdated: entered {}", self.local(site, event.entered))
        };
        format!(
            "event {}, {}, by {}{backdated}",
            event.id,
            self.local(site, event.at),
            event.by
        )
    }

    /// A moment as typed.
    pub(super) fn time(&self, site: &Site, text: &str) -> Result<Timestamp, Failure> {
        time::parse_time(text, site.timezone, self.now).map_err(|error| {
            Failure::request(error.to_string()).at(format!("zone of the site: {}", site.timezone))
        })
    }

    /// A moment as typed that must not lie ahead.
    pub(super) fn past(&self, site: &Site, text: &str) -> Result<Timestamp, Failure> {
        let t = self.time(site, text)?;
        if t > self.now {
            return Err(Failure::request(format!(
                "{} lies {} in the future",
                self.local(site, t),
                figures::age(self.now, t)
            ))
            .at(format!("zone of the site: {}", site.timezone))
            .remedy("give the time at which it was so"));
        }
        Ok(t)
    }

    /// The moment from which something may no more be used: the end of a day, or the moment typed.
    pub(super) fn end_of(&self, site: &Site, text: &str) -> Result<Timestamp, Failure> {
        let next_day = chrono::NaiveDate::parse_from_str(text.trim(), "%Y-%m-%d")
            .ok()
            .and_then(|day| day.succ_opt());
        match next_day {
            Some(day) => self.time(site, &day.to_string()),
            None => self.time(site, text),
        }
    }

    /// For people, in the site's zone.
    #[expect(
        clippy::unused_self,
        reason = "reads as the context's way to print a time"
    )]
    pub(super) fn local(&self, site: &Site, t: Timestamp) -> String {
        time::local(t, site.timezone)
    }

    /// For files and JSON.
    #[expect(
        clippy::unused_self,
        reason = "reads as the context's way to print a time"
    )]
    pub(super) fn rfc3339(&self, t: Timestamp) -> String {
        time::rfc3339_ms(t)
    }

    /// Prints JSON.
    #[expect(clippy::unused_self, reason = "reads as the context's way to print")]
    pub(super) fn put_json(&self, value: &serde_json::Value) -> Result<Exit, Failure> {
        put(&format!("{value:#}\n"))
    }
}

/// Prints text on standard output.
pub(super) fn put(text: &str) -> Result<Exit, Failure> {
    let mut stdout = std::io::stdout().lock();
    stdout
        .write_all(text.as_bytes())
        .and_then(|()| stdout.flush())
        .map_err(|error| Failure::output(&error))?;
    Ok(Exit::Done)
}

/// The text of a configuration.
pub(super) fn read_config(path: &Path) -> Result<String, Failure> {
    let remedy = "name the site's file with --config or in HALFCELL_CONFIG";
    let bytes = std::fs::read(path).map_err(|error| {
        let what = format!("cannot read the configuration {}: {error}", path.display());
        match error.kind() {
            ErrorKind::NotFound | ErrorKind::IsADirectory => Failure::request(what).remedy(remedy),
            _ => Failure::world(what).remedy("give yourself the right to read it"),
        }
    })?;
    String::from_utf8(bytes).map_err(|error| {
        let good = &error.as_bytes()[..error.utf8_error().valid_up_to()];
        let line = good.split(|byte| *byte == b'\n').count();
        Failure::request(format!("the configuration {} is not UTF-8", path.display()))
            .at(format!("line {line}"))
            .remedy("save it as UTF-8 text")
    })
}

/// What is wrong with a configuration, place by place.
pub(super) fn misconfigured(path: &Path, text: &str, errors: &[ConfigError]) -> Failure {
    let path = path.display().to_string();
    let pictures = if std::io::stderr().is_terminal() && std::env::var_os("NO_COLOR").is_none() {
        config::render_styled(&path, text, errors)
    } else {
        config::render(&path, text, errors)
    };
    Failure::request(format!("{path} has {}", counted(errors.len(), "problem"))).shown(pictures)
}

/// `1 line`, `2 lines`.
pub(super) fn counted(n: usize, what: &str) -> String {
    let plural = if n == 1 { "" } else { "s" };
    format!("{n} {what}{plural}")
}

/// A point of the configuration.
pub(super) fn point<'a>(site: &'a Site, tag: &str) -> Result<&'a Point, Failure> {
    site.points
        .iter()
        .find(|point| point.tag.0 == tag)
        .ok_or_else(|| {
            let known: Vec<&str> = site
                .points
                .iter()
                .map(|point| point.tag.0.as_str())
                .collect();
            Failure::request(format!("no point `{tag}`"))
                .at(format!("site `{}`", site.name))
                .remedy(format!("name one of {}", known.join(", ")))
        })
}

/// A duration as typed, ms.
pub(super) fn duration_ms(text: &str) -> Result<i64, Failure> {
    time::parse_duration(text)
        .map(figures::ms)
        .map_err(|error| Failure::request(error.to_string()))
}

/// A text that must say something.
pub(super) fn stated(argument: &str, text: &str) -> Result<String, Failure> {
    let text = text.trim();
    if text.is_empty() {
        Err(Failure::request(format!("`{argument}` is empty")).remedy("say it in a few words"))
    } else {
        Ok(text.to_owned())
    }
}

/// Opens a ledger to read.
pub(super) fn open_reader(path: &Path) -> Result<Reader, Failure> {
    Reader::open(path).map_err(|error| ledger_failed(&error))
}

/// The ledger could not do what was asked.
pub(super) fn ledger_failed(error: &LedgerError) -> Failure {
    let what = chain(error);
    let failure = match error {
        LedgerError::UnstorableEvent { .. } | LedgerError::OtherQuantity { .. } => {
            Failure::request(what)
        }
        _ => Failure::world(what),
    };
    failure.remedy(error.remedy())
}

/// Who records: as named, else the login name.
fn operator(named: Option<&str>) -> Result<String, Failure> {
    if let Some(name) = named {
        return stated("--by", name);
    }
    ["SUDO_USER", "LOGNAME", "USER"]
        .iter()
        .find_map(|variable| {
            std::env::var(variable)
                .ok()
                .filter(|name| !name.trim().is_empty())
        })
        .or_else(account)
        .ok_or_else(|| {
            Failure::request("nobody is logged in by name").remedy("name yourself with --by NAME")
        })
}

/// The account's name, where no login has left it in the surroundings.
fn account() -> Option<String> {
    let uid = rustix::process::getuid().as_raw().to_string();
    let accounts = std::fs::read_to_string("/etc/passwd").ok()?;
    accounts.lines().find_map(|line| {
        let mut fields = line.split(':');
        let name = fields.next()?;
        (fields.nth(1)? == uid).then(|| name.to_owned())
    })
}
