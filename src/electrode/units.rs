//! # Quantities that cannot be confused
//!
//! Each quantity is a type; a conversion has a name. Values are finite by construction, so formulas never meet NaN.
//! A raw `f64` elsewhere carries its unit in its name (`mv`, `temp_c`).

use serde::{Deserialize, Serialize};
use std::fmt;

/// A figure that is not finite or lies outside what its quantity can be.
#[derive(Debug, Clone, Copy, PartialEq, thiserror::Error)]
#[error("{figure} {unit} is outside {lowest} to {highest} {unit}")]
pub struct OutOfRange {
    /// The figure as given.
    pub figure: f64,
    /// The unit it was given in.
    pub unit: &'static str,
    /// Lowest figure this quantity takes.
    pub lowest: f64,
    /// Highest figure this quantity takes.
    pub highest: f64,
}

macro_rules! quantity {
    ($(#[$doc:meta])* $name:ident, $unit:literal, $lowest:expr, $highest:expr, $read:ident) => {
        $(#[$doc])*
        #[derive(Debug, Clone, Copy, PartialEq, PartialOrd, Serialize, Deserialize)]
        #[serde(try_from = "f64", into = "f64")]
        pub struct $name(f64);

        impl $name {
            /// Lowest figure this quantity takes.
            pub const LOWEST: f64 = $lowest;
            /// Highest figure this quantity takes.
            pub const HIGHEST: f64 = $highest;

            #[doc = concat!("From a figure in ", $unit, ".\n\n# Errors\n[`OutOfRange`] when it is not finite or outside the range of the quantity.")]
            pub const fn new(figure: f64) -> Result<Self, OutOfRange> {
                if figure >= Self::LOWEST && figure <= Self::HIGHEST {
                    Ok(Self(figure))
                } else {
                    Err(OutOfRange { figure, unit: $unit, lowest: Self::LOWEST, highest: Self::HIGHEST })
                }
            }

            #[doc = concat!("The figure in ", $unit, ".")]
            pub const fn $read(self) -> f64 {
                self.0
            }
        }

        impl TryFrom<f64> for $name {
            type Error = OutOfRange;
            fn try_from(figure: f64) -> Result<Self, OutOfRange> {
                Self::new(figure)
            }
        }

        impl From<$name> for f64 {
            fn from(quantity: $name) -> f64 {
                quantity.0
            }
        }

        impl fmt::Display for $name {
            fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
                fmt::Display::fmt(&self.0, f)?;
                f.write_str(concat!(" ", $unit))
            }
        }
    };
}

quantity!(
    /// A potential in millivolts, measuring electrode minus reference; ±100 000 mV covers what a meter may print.
    Millivolts, "mV", -100_000.0, 100_000.0, mv
);
quantity!(
    /// A temperature in degrees Celsius, as received: from absolute zero to 2 000 °C, so that an open or shorted sensor's figure is kept.
    ///
    /// ```compile_fail
    /// use halfcell::electrode::units::{Celsius, Kelvin};
    /// fn wants_celsius(_: Celsius) {}
    /// wants_celsius(Kelvin::STANDARD); // an absolute temperature where °C belongs does not compile
    /// ```
    Celsius, "°C", -273.15, 2_000.0, c
);
quantity!(
    /// An absolute temperature in kelvin.
    ///
    /// ```compile_fail
    /// use halfcell::electrode::units::{Celsius, Kelvin};
    /// fn wants_kelvin(_: Kelvin) {}
    /// wants_kelvin(Celsius::new(25.0).unwrap());
    /// ```
    Kelvin, "K", 0.0, 2_273.15, k
);
quantity!(
    /// A pH: minus the logarithm of the hydrogen ion's activity. −10 to 24 covers every electrode's span with room for faults.
    Ph, "pH", -10.0, 24.0, ph
);
quantity!(
    /// Millivolts per pH: the slope of an electrode at one temperature.
    MillivoltsPerPh, "mV/pH", -1_000.0, 1_000.0, mv_per_ph
);
quantity!(
    /// A resistance in ohm.
    Ohms, "Ω", 0.0, 1.0e15, ohm
);

impl Celsius {
    /// −273.15 °C.
    pub const ABSOLUTE_ZERO: Self = Self(-273.15);

    /// 25 °C, the temperature at which slopes in mV/pH are quoted.
    pub const STANDARD: Self = Self(25.0);

    /// The same temperature in kelvin (0 °C is 273.15 K, the definition of the Celsius scale).
    pub const fn to_kelvin(self) -> Kelvin {
        Kelvin(self.0 + 273.15)
    }
}

impl Ohms {
    /// A dead short.
    pub const ZERO: Self = Self(0.0);
}

impl MillivoltsPerPh {
    /// No slope at all: the theoretical slope at absolute zero.
    pub const ZERO: Self = Self(0.0);
}

impl Kelvin {
    /// 298.15 K, which is 25 °C.
    pub const STANDARD: Self = Self(298.15);

    /// The same temperature in degrees Celsius.
    pub const fn to_celsius(self) -> Celsius {
        Celsius(self.0 - 273.15)
    }
}

/// A moment in UTC, milliseconds since 1970-01-01T00:00:00Z, as the wall clock said.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, Deserialize)]
#[serde(transparent)]
pub struct Timestamp(i64);

impl Timestamp {
    /// From milliseconds since 1970-01-01T00:00:00Z.
    pub const fn from_ms(ms: i64) -> Self {
        Self(ms)
    }

    /// Milliseconds since 1970-01-01T00:00:00Z.
    pub const fn ms(self) -> i64 {
        self.0
    }

    /// Days from `earlier` to this moment; negative when `earlier` lies later.
    #[expect(
        clippy::cast_precision_loss,
        reason = "milliseconds of some thousand years are below 2^53"
    )]
    pub fn days_since(self, earlier: Self) -> f64 {
        self.0.saturating_sub(earlier.0) as f64 / 86_400_000.0
    }

    /// This moment moved by `ms` milliseconds (negative: earlier), saturating.
    #[must_use]
    pub const fn plus_ms(self, ms: i64) -> Self {
        Self(self.0.saturating_add(ms))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_figure_that_is_not_finite_is_no_quantity() {
        for figure in [f64::NAN, f64::INFINITY, f64::NEG_INFINITY] {
            assert!(
                Millivolts::new(figure).is_err(),
                "{figure} taken as millivolts"
            );
            assert!(Celsius::new(figure).is_err(), "{figure} taken as °C");
        }
    }

    #[test]
    fn zero_celsius_is_273_15_kelvin_and_back() {
        // Source: definition of the Celsius scale, SI Brochure (9th edition), section 2.3.1.
        let k = Celsius::new(0.0).unwrap().to_kelvin();
        assert!((k.k() - 273.15).abs() < 1e-12, "{k}");
        assert!((k.to_celsius().c()).abs() < 1e-12);
    }

    #[test]
    fn days_between_two_moments_carry_their_sign() {
        let monday = Timestamp::from_ms(0);
        let tuesday = monday.plus_ms(86_400_000);
        assert!((tuesday.days_since(monday) - 1.0).abs() < 1e-12);
        assert!((monday.days_since(tuesday) + 1.0).abs() < 1e-12);
    }
}
