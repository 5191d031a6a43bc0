//! # What the writer does between commits: seals closed hours, prunes what has long been sealed

use super::rollup::HOUR_MS;
use super::seal::{Cut, Pass};
use super::store::Ledger;
use crate::electrode::units::Timestamp;

/// How long after its end an hour is sealed: what was under way has arrived.
const SETTLED_MS: i64 = 120_000;
/// How long sealed rows also stay in arrival order, for whoever follows by sequence number.
pub(super) const KEPT_MS: i64 = 7 * 24 * HOUR_MS;
/// After a failure the chores rest for so long.
const REST_MS: i64 = 60_000;

/// What there is to do, a little at a time.
#[derive(Debug, Default)]
pub(super) struct Chores {
    /// The hour up to which was sealed last; none at start-up.
    sealed_before: Option<i64>,
    pass: Option<Pass>,
    prunes: bool,
    rests_since: Option<i64>,
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
            *self = Self {
                rests_since: Some(now.ms()),
                ..Self::default()
            };
        }
    }
}
