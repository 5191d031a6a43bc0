//! # What the writer does between commits: seals closed hours, prunes what has long been sealed

use super::rollup::HOUR_MS;
use super::seal::{Cut, Pass};
use super::storage::WriterNote;
use super::store::Ledger;
use crate::electrode::units::Timestamp;
use std::time::Duration;

/// How long after its end an hour is sealed: what was under way has arrived.
const SETTLED_MS: i64 = 120_000;
/// How long sealed rows also stay in arrival order, for whoever follows by sequence number.
pub(super) const KEPT_MS: i64 = 7 * 24 * HOUR_MS;
/// After a failure the chores rest for so long.
const REST_MS: i64 = 60_000;
/// How often the writer notes how it did.
const NOTED_MS: i64 = 60_000;

/// What there is to do, a little at a time.
#[derive(Debug, Default)]
pub(super) struct Chores {
    /// The hour up to which was sealed last; none at start-up.
    sealed_before: Option<i64>,
    pass: Option<Pass>,
    prunes: bool,
    rests_since: Option<i64>,
    noted: Option<i64>,
    commits_ms: Vec<f64>,
}

impl Chores {
    /// Whether there is nothing to do at `now`.
    pub(super) fn are_done(&mut self, now: Timestamp) -> bool {
        // The clock may step either way: a rest ends then too.
        if let Some(since) = self.rests_since {
            if (since..since + REST_MS).contains(&now.ms()) {
                return true;
            }
            self.rests_since = None;
        }
        let due = (now.ms() - SETTLED_MS).div_euclid(HOUR_MS) * HOUR_MS;
        if self.pass.is_none() && self.sealed_before != Some(due) {
            self.sealed_before = Some(due);
            self.pass = Some(Pass::new(Cut::Before(Timestamp::from_ms(due)), now));
        }
        self.pass.is_none() && !self.prunes
    }

    /// The clock stepped: everything before row `seq` is sealed.
    pub(super) fn clock_stepped(&mut self, seq: i64, now: Timestamp) {
        self.pass = Some(Pass::new(Cut::UpTo(seq - 1), now));
    }

    /// A commit took so long.
    pub(super) fn committed(&mut self, took: Duration) {
        if self.commits_ms.len() < 10_000 {
            self.commits_ms.push(took.as_secs_f64() * 1e3);
        }
    }

    /// Once a minute, how the commits since went; `waiting` and `dropped` as they are.
    pub(super) fn note(
        &mut self,
        ledger: &mut Ledger,
        now: Timestamp,
        (waiting, dropped): (usize, u64),
    ) {
        let is_due = self
            .noted
            .is_none_or(|noted| !(noted..noted + NOTED_MS).contains(&now.ms()));
        if !is_due || self.commits_ms.is_empty() {
            return;
        }
        self.noted = Some(now.ms());
        let mut times = std::mem::take(&mut self.commits_ms);
        times.sort_by(f64::total_cmp);
        let at = |hundredths: usize| {
            let place = times.len().saturating_mul(hundredths) / 100;
            times[place.min(times.len() - 1)]
        };
        let note = WriterNote {
            commit_ms_p50: at(50),
            commit_ms_p99: at(99),
            commits: times.len(),
            waiting,
            dropped,
        };
        // A note that cannot be written is no loss: the commits beside it tell of the trouble.
        drop(ledger.note("writer", now, &note));
    }

    /// Does a little. Chores that fail are tried again later: nothing depends on their hour.
    pub(super) fn do_some(&mut self, ledger: &mut Ledger, now: Timestamp) {
        if self.are_done(now) {
            return;
        }
        let done = match &mut self.pass {
            Some(pass) => ledger.seal_some(pass).map(|more| {
                if !more {
                    self.pass = None;
                    self.prunes = true;
                }
            }),
            None => ledger
                .prune_some(Timestamp::from_ms(now.ms() - KEPT_MS))
                .map(|more| self.prunes = more),
        };
        if done.is_err() {
            self.sealed_before = None;
            self.pass = None;
            self.prunes = false;
            self.rests_since = Some(now.ms());
        }
    }
}
