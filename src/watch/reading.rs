//! # A reading: one raw sample with what was made of it

use super::flags::{Flag, Tests};
use crate::electrode::history::{EventId, ProbeKind};
use crate::electrode::units::Timestamp;

/// Where the temperature of a reading came from. The number is stored and never changes.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
#[repr(u8)]
pub enum TemperatureSource {
    /// There was none that could be used.
    None = 0,
    /// The meter's own.
    Meter = 1,
    /// From a sensor's resistance.
    Resistance = 2,
    /// The fixed figure of the configuration.
    Fixed = 3,
    /// The sensor failed and the configured fallback stands in.
    Fallback = 4,
}

impl TemperatureSource {
    /// From its stored number.
    pub const fn from_number(number: u8) -> Self {
        match number {
            1 => Self::Meter,
            2 => Self::Resistance,
            3 => Self::Fixed,
            4 => Self::Fallback,
            _ => Self::None,
        }
    }
}

/// One row: raw mV and °C as received, and the value reported for it.
///
/// Raw figures are whole µV and m°C, values whole 1e-4 pH (ORP: 1e-2 mV), u whole 1e-6 of the unit: rounded before anything is
/// computed from them, so that what is stored derives again to the same bits.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Reading {
    /// When, as the wall clock said.
    pub at: Timestamp,
    /// Raw potential, mV.
    pub mv: Option<f64>,
    /// Temperature used (or received, when it was found impossible), °C.
    pub temp_c: Option<f64>,
    /// As reported: pH, or mV against the probe's own reference.
    pub value: Option<f64>,
    /// Expanded uncertainty (k = 2) of the value.
    pub u: Option<f64>,
    /// The calibration that made it.
    pub calibration: Option<EventId>,
    /// How far to trust it.
    pub flag: Flag,
    /// The tests it did not pass.
    pub tests: Tests,
    /// Where the temperature came from.
    pub temperature_source: TemperatureSource,
}

/// Whole steps of `1 / per_unit` nearest to `figure`; `None` when it is not finite or beyond what a row can hold exactly.
#[expect(
    clippy::cast_possible_truncation,
    reason = "a whole number below 2^53 in size"
)]
fn steps(figure: f64, per_unit: f64) -> Option<i64> {
    let whole = (figure * per_unit).round();
    (whole.abs() <= 4.0e15).then_some(whole as i64)
}

/// The figure of so many steps.
#[expect(
    clippy::cast_precision_loss,
    reason = "steps are below 2^53 in size by construction"
)]
fn figure(steps: i64, per_unit: f64) -> f64 {
    steps as f64 / per_unit
}

/// Steps of a stored value per unit: 1e-4 pH, 1e-2 mV.
const fn value_steps_per_unit(kind: ProbeKind) -> f64 {
    match kind {
        ProbeKind::Ph => 1e4,
        ProbeKind::Orp => 1e2,
    }
}

macro_rules! stored {
    ($what:literal, $per_unit:expr, $round:ident, $to:ident, $from:ident $(, $kind:ident)?) => {
        #[doc = concat!("Rounds ", $what, " as it is stored; a figure that cannot be stored comes back as it is.")]
        pub fn $round($($kind: ProbeKind,)? given: f64) -> f64 {
            steps(given, $per_unit).map_or(given, |whole| figure(whole, $per_unit))
        }

        #[doc = concat!("Whole steps of ", $what, "; `None` when it is not finite or too large.")]
        pub fn $to($($kind: ProbeKind,)? given: f64) -> Option<i64> {
            steps(given, $per_unit)
        }

        #[doc = concat!("Back from whole steps of ", $what, ".")]
        pub fn $from($($kind: ProbeKind,)? whole: i64) -> f64 {
            figure(whole, $per_unit)
        }
    };
}

stored!(
    "a potential in mV to 1 µV",
    1e3,
    round_mv,
    mv_steps,
    mv_from_steps
);
stored!(
    "a temperature in °C to 0.001 °C",
    1e3,
    round_temp_c,
    temp_c_steps,
    temp_c_from_steps
);
stored!(
    "a value to 1e-4 pH or 1e-2 mV",
    value_steps_per_unit(kind),
    round_value,
    value_steps,
    value_from_steps,
    kind
);
stored!(
    "an uncertainty to 1e-6 of its unit",
    1e6,
    round_u,
    u_steps,
    u_from_steps
);

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    proptest! {
        #[test]
        fn a_rounded_figure_survives_storage_bit_for_bit(mv in -1e5..1e5f64, c in -273.15..2000.0f64, ph in -10.0..24.0f64, u in 0.0..1e4f64) {
            let same = |rounded: f64, back: f64, given: f64, half_step: f64| {
                rounded.to_bits() == back.to_bits() && (rounded - given).abs() <= half_step * 1.001
            };
            let r = round_mv(mv);
            prop_assert!(same(r, mv_from_steps(mv_steps(r).unwrap()), mv, 5e-4));
            let r = round_temp_c(c);
            prop_assert!(same(r, temp_c_from_steps(temp_c_steps(r).unwrap()), c, 5e-4));
            let r = round_value(ProbeKind::Ph, ph);
            prop_assert!(same(r, value_from_steps(ProbeKind::Ph, value_steps(ProbeKind::Ph, r).unwrap()), ph, 5e-5));
            let r = round_value(ProbeKind::Orp, mv);
            prop_assert!(same(r, value_from_steps(ProbeKind::Orp, value_steps(ProbeKind::Orp, r).unwrap()), mv, 5e-3));
            let r = round_u(u);
            prop_assert!(same(r, u_from_steps(u_steps(r).unwrap()), u, 5e-7));
        }
    }

    #[test]
    fn what_is_not_finite_has_no_steps() {
        for given in [f64::NAN, f64::INFINITY, -1e300] {
            assert_eq!(mv_steps(given), None, "{given}");
        }
    }
}
