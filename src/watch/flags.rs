//! # Flags (QARTOD scale) and the tests behind them

use crate::electrode::UnknownName;
use serde::{Deserialize, Serialize};
use std::fmt;

/// Quality flag of a reading, on the scale of IOOS QARTOD (Manual for Real-Time Oceanographic Data Quality Control Flags, version 1.2, 2020; from memory).
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash, Serialize, Deserialize)]
#[serde(into = "u8", try_from = "u8")]
#[repr(u8)]
pub enum Flag {
    /// Every test that applies was passed.
    Pass = 1,
    /// Not judged: on hold, or not enough data.
    NotEvaluated = 2,
    /// Questionable, or real and remarkable: shown, not hidden.
    Suspect = 3,
    /// Not for use.
    Fail = 4,
    /// There is no value.
    Missing = 9,
}

impl Flag {
    /// Every flag, in order of its number.
    pub const ALL: [Self; 5] = [
        Self::Pass,
        Self::NotEvaluated,
        Self::Suspect,
        Self::Fail,
        Self::Missing,
    ];

    /// The number that stands in files.
    pub const fn number(self) -> u8 {
        self as u8
    }

    /// The word for people.
    pub const fn word(self) -> &'static str {
        match self {
            Self::Pass => "pass",
            Self::NotEvaluated => "not evaluated",
            Self::Suspect => "suspect",
            Self::Fail => "fail",
            Self::Missing => "missing",
        }
    }
}

/// A number that is no flag.
#[derive(Debug, Clone, Copy, PartialEq, Eq, thiserror::Error)]
#[error("{0} is no flag; flags are 1, 2, 3, 4 and 9")]
pub struct NotAFlag(pub u8);

impl TryFrom<u8> for Flag {
    type Error = NotAFlag;
    fn try_from(number: u8) -> Result<Self, NotAFlag> {
        Self::ALL
            .into_iter()
            .find(|flag| flag.number() == number)
            .ok_or(NotAFlag(number))
    }
}

impl From<Flag> for u8 {
    fn from(flag: Flag) -> u8 {
        flag.number()
    }
}

impl fmt::Display for Flag {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.pad(self.word())
    }
}

crate::electrode::named::named! {
    /// A test a reading may not have passed. The order is the bit's place in stored rows and never changes.
    Test, "test" {
        /// No sample arrived when one was due.
        Gap = "gap",
        /// Beyond what the electrode or the point can read.
        GrossRange = "gross-range",
        /// Away from both neighbours.
        Spike = "spike",
        /// Moving faster than the liquid can.
        RateOfChange = "rate-of-change",
        /// Not moving at all.
        FlatLine = "flat-line",
        /// Moving much less than its history.
        Attenuated = "attenuated",
        /// The meter said over range.
        OverRange = "over-range",
        /// At the end of the meter's scale.
        Rail = "rail",
        /// Held near the offset whatever the liquid does.
        Pinned = "pinned",
        /// Alternating like mains pick-up.
        Mains = "mains",
        /// Temperature missing, open, short or impossible.
        Temperature = "temperature",
        /// Temperature does not move.
        TemperatureFrozen = "temperature-frozen",
        /// Disagrees with a point in the same liquid.
        Pair = "pair",
        /// Uncertainty beyond the point's tolerance.
        Uncertainty = "uncertainty",
        /// Function check: somebody is working on it.
        Hold = "hold",
        /// Far outside the span of the calibration's buffers.
        Span = "span",
        /// Alkaline (sodium) error possible.
        Sodium = "sodium",
        /// Acid error possible.
        Acid = "acid",
        /// No accepted calibration, or no probe, in force.
        NoCalibration = "no-calibration",
    }
}

/// The set of tests a reading did not pass.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash, Default)]
pub struct Tests(u32);

impl Tests {
    /// None.
    pub const NONE: Self = Self(0);

    /// From stored bits; bits that name no test are dropped.
    pub fn from_bits(bits: u32) -> Self {
        Self(bits & ((1 << Test::ALL.len()) - 1))
    }

    /// The bits as stored.
    pub const fn bits(self) -> u32 {
        self.0
    }

    /// Marks `test` as not passed.
    pub fn mark(&mut self, test: Test) {
        self.0 |= 1 << test as u32;
    }

    /// Whether `test` was not passed.
    pub const fn has(self, test: Test) -> bool {
        self.0 & (1 << test as u32) != 0
    }

    /// Whether all were passed.
    pub const fn is_empty(self) -> bool {
        self.0 == 0
    }

    /// The tests, in order.
    pub fn iter(self) -> impl Iterator<Item = Test> {
        Test::ALL
            .iter()
            .copied()
            .filter(move |test| self.has(*test))
    }
}

impl fmt::Display for Tests {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        for (n, test) in self.iter().enumerate() {
            if n > 0 {
                f.write_str(";")?;
            }
            f.write_str(test.name())?;
        }
        Ok(())
    }
}

impl std::str::FromStr for Tests {
    type Err = UnknownName;
    fn from_str(text: &str) -> Result<Self, UnknownName> {
        let mut tests = Self::NONE;
        for word in text.split(';').filter(|word| !word.is_empty()) {
            tests.mark(word.parse()?);
        }
        Ok(tests)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn tests_come_back_from_text_and_bits_as_they_went() {
        let mut tests = Tests::NONE;
        tests.mark(Test::Gap);
        tests.mark(Test::NoCalibration);
        assert_eq!(tests.to_string(), "gap;no-calibration");
        assert_eq!(tests.to_string().parse::<Tests>().unwrap(), tests);
        assert_eq!(Tests::from_bits(tests.bits()), tests);
    }

    #[test]
    fn flags_are_the_five_numbers_of_the_scale() {
        // Source: IOOS QARTOD, Manual for Real-Time Oceanographic Data Quality Control Flags, version 1.2 (2020), from memory.
        assert_eq!(Flag::ALL.map(Flag::number), [1, 2, 3, 4, 9]);
        assert_eq!(Flag::try_from(5), Err(NotAFlag(5)));
    }
}
