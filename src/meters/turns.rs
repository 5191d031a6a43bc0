//! # Whose turn it is on a line where meters are asked
//!
//! Always: 1. One question at a time. 2. After a failure nobody is asked until the line has been silent for one timeout: an answer
//! carries no number, so only silence parts an old one from a new one. 3. A meter that fails pays for the time it wasted.

use std::time::{Duration, Instant};

/// How often a meter that failed [`DEAD_AFTER`] times in a row is asked.
pub(crate) const DEAD_EVERY: Duration = Duration::from_secs(30);

/// Failures in a row after which a meter counts as silent.
pub(crate) const DEAD_AFTER: u32 = 3;

/// Timeouts that a noisy bus is waited for to become quiet, where answers carry an address.
const PATIENCE: u32 = 10;

/// A meter's turn.
#[derive(Debug, Clone)]
pub(crate) struct Turn {
    pub(crate) meter: usize,
    pub(crate) every: Duration,
    pub(crate) timeout: Duration,
    tick: Instant,
    due: Instant,
    failures: u32,
    good: Instant,
}

/// What becomes of a meter by an answer or its absence.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) enum Change {
    None,
    Silent { since: Instant },
    Back { away: Duration },
}

/// How a question failed.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) enum Failure {
    /// No answer, or not a right one: an answer may still be on its way.
    NoAnswer,
    /// The meter itself refused; nothing more is on its way.
    Refused,
}

#[derive(Debug, Clone)]
pub(crate) struct Turns {
    meters: Vec<Turn>,
    phase: Phase,
    heard: Option<Instant>,
    /// Silence wanted between what was last heard and a question.
    gap: Duration,
    /// Whether answers carry an address.
    addressed: bool,
}

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Phase {
    Idle,
    /// The turn goes on with its next question.
    GoingOn {
        turn: usize,
    },
    Waiting {
        turn: usize,
        asked: Instant,
        until: Instant,
    },
    Quiet {
        turn: usize,
        since: Instant,
        timeout: Duration,
    },
}

impl Turn {
    pub(crate) fn new(meter: usize, every: Duration, timeout: Duration, now: Instant) -> Self {
        let (every, timeout) = (
            every.max(Duration::from_millis(1)),
            timeout.max(Duration::from_millis(1)),
        );
        Self {
            meter,
            every,
            timeout,
            tick: now,
            due: now,
            failures: 0,
            good: now,
        }
    }

    /// The next tick; ticks never drift, and at most one that was missed is made up for.
    fn next_tick(&mut self, now: Instant) {
        self.tick += self.every;
        let late = now.saturating_duration_since(self.tick).as_nanos() / self.every.as_nanos();
        self.tick += self.every * u32::try_from(late).unwrap_or(u32::MAX);
        self.due = self.tick;
    }
}

impl Turns {
    pub(crate) fn new(meters: Vec<Turn>, gap: Duration, addressed: bool) -> Self {
        Self {
            meters,
            phase: Phase::Idle,
            heard: None,
            gap,
            addressed,
        }
    }

    /// The line was opened: everybody is due, once the line has been quiet.
    pub(crate) fn opened(&mut self, now: Instant) {
        for turn in &mut self.meters {
            *turn = Turn::new(turn.meter, turn.every, turn.timeout, now);
        }
        self.heard = None;
        self.phase = match self
            .meters
            .iter()
            .enumerate()
            .max_by_key(|(_, t)| t.timeout)
        {
            Some((turn, slowest)) => Phase::Quiet {
                turn,
                since: now,
                timeout: slowest.timeout,
            },
            None => Phase::Idle,
        };
    }

    pub(crate) fn heard(&mut self, now: Instant) {
        self.heard = Some(now);
    }

    pub(crate) fn turn(&self, turn: usize) -> Option<&Turn> {
        self.meters.get(turn)
    }

    /// Whose answer is awaited, and when it was asked.
    pub(crate) fn awaited(&self) -> Option<(usize, Instant)> {
        match self.phase {
            Phase::Waiting { turn, asked, .. } => Some((turn, asked)),
            Phase::Idle | Phase::GoingOn { .. } | Phase::Quiet { .. } => None,
        }
    }

    /// Whose time is over without an answer.
    pub(crate) fn expired(&self, now: Instant) -> Option<usize> {
        match self.phase {
            Phase::Waiting { turn, until, .. } if now >= until => Some(turn),
            Phase::Waiting { .. } | Phase::Idle | Phase::GoingOn { .. } | Phase::Quiet { .. } => {
                None
            }
        }
    }

    /// Who is to be asked now. `in_a_line`: somebody is in the middle of saying something.
    pub(crate) fn next(&mut self, now: Instant, in_a_line: bool) -> Option<usize> {
        let (turn, at) = self.upcoming(in_a_line)?;
        if now < at {
            return None;
        }
        if let Phase::Quiet {
            turn: failed,
            since,
            timeout,
        } = self.phase
        {
            // A bus that never becomes quiet is used again, but not for the question whose answer may still come.
            let noisy = self.addressed && now < self.heard.unwrap_or(since).max(since) + timeout;
            if let Some(failed) = self.meters.get_mut(failed).filter(|_| noisy) {
                failed.due = failed.due.max(now + DEAD_EVERY);
            }
            self.phase = Phase::Idle;
            return self.next(now, in_a_line);
        }
        Some(turn)
    }

    /// When something is to be done if nothing is heard until then.
    pub(crate) fn wake_at(&self, in_a_line: bool) -> Option<Instant> {
        match self.phase {
            Phase::Waiting { until, .. } => Some(until),
            Phase::Idle | Phase::GoingOn { .. } | Phase::Quiet { .. } => {
                self.upcoming(in_a_line).map(|(_, at)| at)
            }
        }
    }

    /// Who is next and when, if nothing is heard until then.
    fn upcoming(&self, in_a_line: bool) -> Option<(usize, Instant)> {
        let first = || {
            self.meters
                .iter()
                .enumerate()
                .min_by_key(|(_, turn)| turn.due)
        };
        let (idx, turn, ready) = match self.phase {
            Phase::Waiting { .. } => return None,
            Phase::GoingOn { turn } => (turn, self.meters.get(turn)?, None),
            Phase::Idle => first().map(|(idx, turn)| (idx, turn, Some(turn.due)))?,
            Phase::Quiet { since, timeout, .. } => {
                let quiet = self.heard.unwrap_or(since).max(since) + timeout;
                let end = if self.addressed {
                    quiet.min(since + timeout * PATIENCE)
                } else {
                    quiet
                };
                first().map(|(idx, turn)| (idx, turn, Some(turn.due.max(end))))?
            }
        };
        let gap = if in_a_line { turn.timeout } else { self.gap };
        let clear = self.heard.map(|heard| heard + gap);
        Some((idx, ready.max(clear).unwrap_or(turn.tick)))
    }

    /// The question was sent; `wire` is the time that it and its answer spend on the wire.
    pub(crate) fn asked(&mut self, turn: usize, now: Instant, wire: Duration) {
        if let Some(asked) = self.meters.get(turn) {
            self.phase = Phase::Waiting {
                turn,
                asked: now,
                until: now + asked.timeout + wire,
            };
        }
    }

    /// A right answer came, and the same meter has more to say.
    pub(crate) fn going_on(&mut self, turn: usize) {
        self.phase = Phase::GoingOn { turn };
    }

    /// The right answer came.
    pub(crate) fn answered(&mut self, turn: usize, now: Instant) -> Change {
        self.phase = Phase::Idle;
        let Some(turn) = self.meters.get_mut(turn) else {
            return Change::None;
        };
        let was_silent = turn.failures >= DEAD_AFTER;
        let away = now.saturating_duration_since(turn.good);
        turn.failures = 0;
        turn.good = now;
        turn.next_tick(now);
        if was_silent {
            Change::Back { away }
        } else {
            Change::None
        }
    }

    /// The question failed.
    pub(crate) fn failed(&mut self, turn: usize, failure: Failure, now: Instant) -> Change {
        let asked = self.awaited().map_or(now, |(_, asked)| asked);
        let idx = turn;
        let Some(turn) = self.meters.get_mut(idx) else {
            return Change::None;
        };
        turn.failures = turn.failures.saturating_add(1);
        turn.next_tick(now);
        match failure {
            Failure::Refused => self.phase = Phase::Idle,
            Failure::NoAnswer => {
                // The meter leaves the line to the others for as long as it has kept it from them.
                let wasted = now.saturating_duration_since(asked) + turn.timeout;
                let rested = now + turn.timeout + wasted;
                turn.due = match turn.failures {
                    1 => rested,
                    n if n < DEAD_AFTER => turn.tick.max(rested),
                    _ => now + DEAD_EVERY.max(turn.every),
                };
                self.phase = Phase::Quiet {
                    turn: idx,
                    since: now,
                    timeout: turn.timeout,
                };
            }
        }
        if turn.failures == DEAD_AFTER {
            Change::Silent { since: turn.good }
        } else {
            Change::None
        }
    }
}

#[cfg(test)]
#[expect(clippy::disallowed_methods, reason = "a moment to count from")]
mod tests {
    use super::*;

    const S: Duration = Duration::from_secs(1);
    const MS: Duration = Duration::from_millis(1);

    fn turns(n: usize, now: Instant) -> Turns {
        let mut turns = Turns::new(
            (0..n).map(|m| Turn::new(m, S, 100 * MS, now)).collect(),
            2 * MS,
            true,
        );
        turns.opened(now);
        turns
    }

    /// Runs for `span`; each asked meter answers after 10 ms unless it is `dead`. Gives the moments each was asked.
    fn asked(
        turns: &mut Turns,
        start: Instant,
        span: Duration,
        dead: &[usize],
    ) -> Vec<Vec<Duration>> {
        let mut asked = vec![Vec::new(); turns.meters.len()];
        let mut now = start;
        while now < start + span {
            if let Some(turn) = turns.expired(now) {
                turns.failed(turn, Failure::NoAnswer, now);
            }
            if let Some(turn) = turns.next(now, false) {
                asked[turn].push(now - start);
                turns.asked(turn, now, Duration::ZERO);
                if !dead.contains(&turn) {
                    now += 10 * MS;
                    turns.heard(now);
                    turns.answered(turn, now);
                }
            }
            now = turns.wake_at(false).unwrap().max(now);
        }
        asked
    }

    #[test]
    fn polls_keep_to_their_grid_for_a_day() {
        let start = Instant::now();
        let asked = asked(&mut turns(3, start), start, 86_400 * S, &[]);
        for times in asked {
            assert_eq!(times.len(), 86_400);
            let last = times[86_399];
            assert!(last < 86_399 * S + 150 * MS, "drifted to {last:?}");
        }
    }

    #[test]
    fn a_dead_meter_is_asked_seldom_and_costs_the_others_no_poll() {
        let start = Instant::now();
        let asked = asked(&mut turns(8, start), start, 600 * S, &[4]);
        for (meter, times) in asked.iter().enumerate() {
            if meter == 4 {
                assert!(
                    (20..=24).contains(&times.len()),
                    "asked {} times in 600 s",
                    times.len()
                );
            } else {
                assert!(
                    times.len() >= 600,
                    "meter {meter} was polled {} times in 600 s",
                    times.len()
                );
            }
        }
    }

    #[test]
    fn after_a_failure_nobody_is_asked_until_the_line_was_silent_for_a_timeout() {
        let start = Instant::now();
        let mut turns = turns(2, start);
        let begin = start + 100 * MS;
        assert_eq!(turns.next(begin, false), Some(0));
        turns.asked(0, begin, Duration::ZERO);
        let late = begin + 100 * MS;
        assert_eq!(turns.expired(late), Some(0));
        assert_eq!(turns.failed(0, Failure::NoAnswer, late), Change::None);
        turns.heard(late + 60 * MS);
        assert_eq!(turns.next(late + 159 * MS, false), None);
        assert_eq!(turns.next(late + 160 * MS, false), Some(1));
    }

    #[test]
    fn silence_is_told_once_and_so_is_the_return() {
        let start = Instant::now();
        let mut turns = turns(1, start);
        let changes: Vec<Change> = (1..=5)
            .map(|n| turns.failed(0, Failure::NoAnswer, start + n * S))
            .collect();
        assert_eq!(
            changes,
            [
                Change::None,
                Change::None,
                Change::Silent { since: start },
                Change::None,
                Change::None
            ]
        );
        assert_eq!(
            turns.answered(0, start + 40 * S),
            Change::Back { away: 40 * S }
        );
        assert_eq!(turns.answered(0, start + 41 * S), Change::None);
    }
}
