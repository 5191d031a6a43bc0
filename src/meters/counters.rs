//! # What became of the bytes: counts by reason, with the last few examples
//!
//! Always: on a text line, samples and rejections together are not fewer than the lines heard.

use super::own_time::OwnClock;
use std::collections::VecDeque;
use std::time::Duration;

/// How many rejected examples are kept per line.
pub const EXAMPLES: usize = 5;

/// Why something that was heard gave no sample.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub enum Reason {
    /// A line longer than the splitter holds.
    TooLong,
    /// A NUL byte: parity or frame error, or a cable just plugged in.
    Damaged,
    /// Begun before we listened, or broken off in the middle.
    HalfLine,
    /// No meter's pattern is in the line.
    NoMatch,
    /// The checksum is wrong or absent.
    Checksum,
    /// The pattern matched something that is no whole number.
    Figure,
    /// Our own question, handed back by the line.
    Echo,
    /// Came when nothing had been asked: a late answer, or a talker.
    Unasked,
    /// Bytes while an answer was awaited, but not that answer.
    NotTheAnswer,
    /// A Modbus exception.
    Exception,
}

impl Reason {
    /// Every one, in order.
    pub const ALL: [Self; 10] = [
        Self::TooLong,
        Self::Damaged,
        Self::HalfLine,
        Self::NoMatch,
        Self::Checksum,
        Self::Figure,
        Self::Echo,
        Self::Unasked,
        Self::NotTheAnswer,
        Self::Exception,
    ];

    /// The word shown to people.
    pub const fn name(self) -> &'static str {
        match self {
            Self::TooLong => "too-long",
            Self::Damaged => "damaged",
            Self::HalfLine => "half-line",
            Self::NoMatch => "no-match",
            Self::Checksum => "checksum",
            Self::Figure => "figure",
            Self::Echo => "echo",
            Self::Unasked => "unasked",
            Self::NotTheAnswer => "not-the-answer",
            Self::Exception => "exception",
        }
    }
}

/// Something that was thrown away, as shown by `status --lines`.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Example {
    /// Why.
    pub reason: Reason,
    /// Its beginning, printable.
    pub text: String,
}

/// Counts of one line since its task began.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct Counters {
    /// Why the port is lost; `None` while it is open.
    pub lost: Option<String>,
    /// Bytes heard.
    pub bytes: u64,
    /// Text lines ended, or Modbus answers taken.
    pub lines: u64,
    /// Times the port was opened again.
    pub reopenings: u64,
    /// The last few rejections, oldest first.
    pub examples: VecDeque<Example>,
    /// One entry per meter of the line.
    pub meters: Vec<MeterCounters>,
    rejected: [u64; Reason::ALL.len()],
}

/// Counts of one meter since its line's task began.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct MeterCounters {
    /// Index into [`Site::meters`](crate::config::site::Site::meters).
    pub meter: usize,
    /// Samples delivered.
    pub samples: u64,
    /// Questions asked.
    pub asked: u64,
    /// Questions without an answer in time.
    pub timeouts: u64,
    /// From the last answered question to its answer.
    pub latency: Duration,
    /// The longest such time.
    pub latency_max: Duration,
    /// Its own clock, where it prints one.
    pub clock: Option<OwnClock>,
}

impl Counters {
    /// For a line with these meters.
    pub(crate) fn new(meters: impl IntoIterator<Item = usize>) -> Self {
        Self {
            meters: meters
                .into_iter()
                .map(|meter| MeterCounters {
                    meter,
                    ..MeterCounters::default()
                })
                .collect(),
            ..Self::default()
        }
    }

    /// How often something was rejected for this reason.
    pub fn rejected(&self, reason: Reason) -> u64 {
        self.rejected.get(reason as usize).copied().unwrap_or(0)
    }

    /// How often something was rejected.
    pub fn rejected_total(&self) -> u64 {
        self.rejected.iter().sum()
    }

    /// Samples of all meters.
    pub fn samples(&self) -> u64 {
        self.meters.iter().map(|m| m.samples).sum()
    }

    pub(crate) fn reject(&mut self, reason: Reason, bytes: &[u8]) {
        self.reject_as(
            reason,
            bytes
                .iter()
                .take(60)
                .flat_map(|&b| std::ascii::escape_default(b))
                .map(char::from)
                .collect(),
        );
    }

    pub(crate) fn reject_as(&mut self, reason: Reason, text: String) {
        if let Some(count) = self.rejected.get_mut(reason as usize) {
            *count += 1;
        }
        if self.examples.len() == EXAMPLES {
            self.examples.pop_front();
        }
        self.examples.push_back(Example { reason, text });
    }

    pub(crate) fn meter(&mut self, meter: usize, change: impl FnOnce(&mut MeterCounters)) {
        if let Some(counters) = self.meters.iter_mut().find(|m| m.meter == meter) {
            change(counters);
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn reasons_are_counted_apart_and_few_examples_are_kept() {
        let mut counters = Counters::new([3]);
        for n in 0..100_u8 {
            counters.reject(Reason::NoMatch, &[n; 300]);
        }
        counters.reject(Reason::Damaged, b"\0\xff7.0");
        assert_eq!(
            (
                counters.rejected(Reason::NoMatch),
                counters.rejected(Reason::Damaged),
                counters.rejected_total()
            ),
            (100, 1, 101)
        );
        assert_eq!(counters.examples.len(), EXAMPLES);
        assert_eq!(counters.examples[EXAMPLES - 1].text, r"\x00\xff7.0");
    }

    #[test]
    fn every_reason_has_its_own_place_and_word() {
        for (place, reason) in Reason::ALL.into_iter().enumerate() {
            assert_eq!(reason as usize, place, "{}", reason.name());
        }
    }
}
