//! A site in a temporary folder and the real program.

use halfcell::electrode::history::Book;
use halfcell::ledger::Reader;
use serde_json::Value;
use std::path::PathBuf;
use std::process::{Command, Output, Stdio};

/// Two pH points (one with a fixed temperature) and one ORP point on a line nobody opens.
pub(crate) const CONFIG: &str = include_str!("site.toml");

/// A site with its configuration and, once something is recorded, its ledger.
pub(crate) struct Site {
    pub(crate) folder: tempfile::TempDir,
}

/// What the program said.
#[derive(Debug)]
pub(crate) struct Said {
    pub(crate) code: i32,
    pub(crate) stdout: String,
    pub(crate) stderr: String,
}

impl Said {
    pub(crate) fn json(&self) -> Value {
        serde_json::from_str(&self.stdout)
            .unwrap_or_else(|error| panic!("no JSON ({error}): {self:?}"))
    }
}

impl From<Output> for Said {
    fn from(output: Output) -> Self {
        Self {
            code: output.status.code().unwrap(),
            stdout: String::from_utf8(output.stdout).unwrap(),
            stderr: String::from_utf8(output.stderr).unwrap(),
        }
    }
}

impl Site {
    pub(crate) fn new() -> Self {
        let folder = tempfile::tempdir().unwrap();
        let ledger = folder.path().join("site.db");
        let text = CONFIG.replace("LEDGER", ledger.to_str().unwrap());
        std::fs::write(folder.path().join("halfcell.toml"), text).unwrap();
        Self { folder }
    }

    pub(crate) fn path(&self, name: &str) -> PathBuf {
        self.folder.path().join(name)
    }

    /// The program with this site's configuration, without anything of the tester's own surroundings.
    pub(crate) fn command(&self) -> Command {
        let mut command = Command::new(env!("CARGO_BIN_EXE_halfcell"));
        command
            .env("HALFCELL_CONFIG", self.path("halfcell.toml"))
            .env("LOGNAME", "oake")
            .env_remove("SUDO_USER")
            .stdin(Stdio::null())
            .current_dir(self.folder.path());
        command
    }

    /// Runs it with the words of a line, quotes as in a shell.
    pub(crate) fn run(&self, line: &str) -> Said {
        Said::from(self.command().args(words(line)).output().unwrap())
    }

    /// Runs it and wants it done.
    #[track_caller]
    pub(crate) fn done(&self, line: &str) -> Said {
        let said = self.run(line);
        assert_eq!(said.code, 0, "`{line}`: {said:?}");
        said
    }

    /// Runs it, wants this code, this text on standard error, and no event more than before.
    #[track_caller]
    pub(crate) fn refused(&self, line: &str, told: &str) {
        let before = self.events();
        let said = self.run(line);
        assert_eq!(said.stderr, self.filled(told), "`{line}`");
        assert_eq!(said.code, 2, "`{line}`: {said:?}");
        assert_eq!(said.stdout, "", "`{line}`");
        assert_eq!(self.events(), before, "`{line}` wrote an event");
    }

    /// `FOLDER` stands for the site's folder.
    pub(crate) fn filled(&self, text: &str) -> String {
        text.replace("FOLDER", self.folder.path().to_str().unwrap())
    }

    pub(crate) fn reader(&self) -> Reader {
        Reader::open(&self.path("site.db")).unwrap()
    }

    pub(crate) fn book(&self) -> Book {
        self.reader().book(None).unwrap()
    }

    /// How many events the ledger holds; none when there is no ledger yet.
    pub(crate) fn events(&self) -> usize {
        if self.path("site.db").exists() {
            self.reader().events(0).unwrap().len()
        } else {
            0
        }
    }

    /// A pH probe at POND-3 since March, two lots, calibrated in phthalate and phosphate at 25 °C with a slope near 0.98.
    pub(crate) fn with_probe() -> Self {
        let site = Self::new();
        site.done("probe add P-1042 --kind ph --serial A1 --at '2026-03-01 08:00'");
        site.done("probe place P-1042 --point POND-3 --at '2026-03-01 09:00'");
        site
    }
}

/// Splits as a shell would, as far as these tests need: spaces and quotes.
pub(crate) fn words(line: &str) -> Vec<String> {
    let mut words = vec![String::new()];
    let mut quoted = false;
    for c in line.chars() {
        match c {
            '\'' => quoted = !quoted,
            ' ' if !quoted => words.push(String::new()),
            c => words.last_mut().unwrap().push(c),
        }
    }
    words.retain(|word| !word.is_empty());
    words
}
