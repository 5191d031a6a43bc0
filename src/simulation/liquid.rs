//! # Liquids: what is truly in the tank, as a function of the time alone
//!
//! The figures are the right size for such water and no more: common practice, no source.

use super::random::{smooth_at, uniform_at};
use crate::electrode::units::Timestamp;
use std::f64::consts::{PI, TAU};

/// Minutes of one dosing cycle of the neutralisation tank.
const NEUTRALISATION_CYCLE_MIN: f64 = 26.0;
/// pH the neutralisation tank is brought back to by each dose of acid.
const NEUTRALISED_PH: f64 = 7.0;
/// Minutes between two strokes of the disinfection basin's dosing pump.
const CHLORINE_CYCLE_MIN: f64 = 18.0;

/// What kind of liquid it is.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum LiquidKind {
    /// A green pond: by day the algae take up CO2 and the pH rises, by night everything breathes and it falls.
    Pond {
        /// How far the pH swings from night to day.
        swing_ph: f64,
    },
    /// A raceway of cool water: steady, with a dip after each of three feedings.
    Raceway,
    /// A tank of alkaline waste water: the pH creeps up, a dose of acid brings it down.
    NeutralisationTank,
    /// A basin with chlorine dosed in strokes: the value is ORP, mV against an Ag/AgCl 3 mol/L reference.
    DisinfectionBasin,
}

/// A liquid with a history of its own.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Liquid {
    /// What it is.
    pub kind: LiquidKind,
    /// Makes it differ from others of its kind.
    pub seed: u64,
    /// Local noon, hours after midnight UTC: when the sun is highest.
    pub noon_utc_h: f64,
}

/// The truth about a liquid at one moment.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Condition {
    /// pH, or ORP in mV against an Ag/AgCl 3 mol/L reference.
    pub value: f64,
    /// Temperature, °C.
    pub temp_c: f64,
}

impl Liquid {
    /// The truth at `t`.
    pub fn at(&self, t: Timestamp) -> Condition {
        let days = t.days_since(Timestamp::from_ms(0)) - (self.noon_utc_h - 12.0) / 24.0;
        let hour = days.rem_euclid(1.0) * 24.0;
        // Hours-long weather, days-long weather.
        let hours = smooth_at(self.seed, days * 8.0);
        let weather = smooth_at(self.seed ^ 0x57EA, days / 1.5);
        let daily = |peak_hour: f64| ((hour - peak_hour) / 24.0 * TAU).cos();
        match self.kind {
            LiquidKind::Pond { swing_ph } => {
                // Cloud takes up to half of the light away. The pH is highest some hours after noon.
                let light = 1.0 - 0.25 * (1.0 + weather.clamp(-1.0, 1.0));
                Condition {
                    value: 7.65 + swing_ph * (0.5 * light * daily(16.0) + 0.05 * hours),
                    temp_c: 15.5 + 1.9 * light * daily(17.0) - 1.2 * weather,
                }
            }
            LiquidKind::Raceway => {
                let fed: f64 = [8.0, 12.5, 17.0]
                    .iter()
                    .map(|meal| (hour - meal) / 0.8)
                    .filter(|since| *since > 0.0)
                    .map(|since| since * (1.0 - since).exp())
                    .sum();
                Condition {
                    value: 7.28 + 0.03 * daily(15.0) + 0.02 * hours - 0.09 * fed,
                    temp_c: 11.4 + 0.3 * daily(17.0) + 0.2 * weather,
                }
            }
            LiquidKind::NeutralisationTank => {
                let (cycle, part) = cycle(days, NEUTRALISATION_CYCLE_MIN);
                let peak_ph = 8.1 + 0.7 * uniform_at(self.seed, cycle);
                let height = if part < 0.85 {
                    (part / 0.85).powf(1.4)
                } else {
                    0.5 + 0.5 * ((part - 0.85) / 0.15 * PI).cos()
                };
                Condition {
                    value: NEUTRALISED_PH + (peak_ph - NEUTRALISED_PH) * height,
                    temp_c: 24.0 + 1.5 * daily(14.0) + 0.8 * hours,
                }
            }
            LiquidKind::DisinfectionBasin => {
                let (_, part) = cycle(days, CHLORINE_CYCLE_MIN);
                // A stroke is mixed in within a tenth of the cycle, then used up.
                let chlorine = if part < 0.1 {
                    part / 0.1
                } else {
                    1.0 - (part - 0.1) / 0.9
                };
                Condition {
                    value: 672.0 + 22.0 * chlorine + 8.0 * hours - 12.0 * daily(14.0),
                    temp_c: 13.0 + 0.8 * daily(16.0) + 0.3 * weather,
                }
            }
        }
    }
}

/// Which cycle of `minutes` it is, and how far into it (0 to 1).
fn cycle(days: f64, minutes: f64) -> (i64, f64) {
    let cycles = days * 1440.0 / minutes;
    #[expect(
        clippy::cast_possible_truncation,
        reason = "cycles of minutes in some centuries"
    )]
    let number = cycles.floor() as i64;
    (number, cycles - cycles.floor())
}

#[cfg(test)]
mod tests {
    use super::*;

    const NOON_UTC_H: f64 = 16.2;

    fn liquid(kind: LiquidKind) -> Liquid {
        Liquid {
            kind,
            seed: 11,
            noon_utc_h: NOON_UTC_H,
        }
    }

    /// Values every minute from local midnight of some day on.
    fn minutes(kind: LiquidKind, n: i64) -> Vec<Condition> {
        let start = Timestamp::from_ms(20_000 * 86_400_000 + 15_120_000);
        (0..n)
            .map(|minute| liquid(kind).at(start.plus_ms(minute * 60_000)))
            .collect()
    }

    #[test]
    fn a_pond_is_more_alkaline_in_the_afternoon_than_before_dawn_every_day() {
        let days = minutes(LiquidKind::Pond { swing_ph: 1.0 }, 30 * 1440);
        for (n, day) in days.chunks(1440).enumerate() {
            let (dawn, afternoon) = (day[4 * 60].value, day[16 * 60].value);
            assert!(
                afternoon - dawn > 0.3,
                "day {n}: {dawn:.2} before dawn, {afternoon:.2} in the afternoon"
            );
        }
    }

    #[test]
    fn a_neutralisation_tank_rises_slowly_and_falls_fast() {
        let tank = minutes(LiquidKind::NeutralisationTank, 1440);
        let rising = tank.windows(2).filter(|w| w[1].value > w[0].value).count();
        assert!(rising > 1440 * 7 / 10, "{rising} of 1440 minutes rising");
        let lowest = tank.iter().map(|c| c.value).fold(f64::MAX, f64::min);
        let highest = tank.iter().map(|c| c.value).fold(f64::MIN, f64::max);
        assert!(lowest < 7.1 && highest > 8.3, "{lowest} to {highest}");
    }

    #[test]
    fn every_liquid_stays_where_such_water_stays_for_a_year() {
        for (kind, low, high) in [
            (LiquidKind::Pond { swing_ph: 1.0 }, 6.8, 9.0),
            (LiquidKind::Raceway, 6.9, 7.6),
            (LiquidKind::NeutralisationTank, 6.9, 8.9),
            (LiquidKind::DisinfectionBasin, 600.0, 760.0),
        ] {
            let liquid = liquid(kind);
            for quarter_hour in 0..4 * 24 * 365 {
                let now = liquid.at(Timestamp::from_ms(quarter_hour * 900_000));
                assert!((low..high).contains(&now.value), "{kind:?}: {now:?}");
                assert!((3.0..32.0).contains(&now.temp_c), "{kind:?}: {now:?}");
            }
        }
    }
}
