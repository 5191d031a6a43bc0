//! # Electrodes that age: the true offset and slope at any time, and what a meter would show
//!
//! in: the truth about a liquid, a time. out: millivolts and the probe's own temperature.
//! The same model as everywhere: `E = offset + slope · k(T) · (pH_iso − pH)`; ORP: `E = ORP + offset`.

use super::liquid::Liquid;
use super::random::{normal_at, walk_at};
use crate::electrode::history::ProbeKind;
use crate::electrode::slope::nernst_slope;
use crate::electrode::units::{Celsius, Kelvin, Timestamp};

/// What a meter shows as temperature when the sensor's circuit is open, °C.
pub const OPEN_SENSOR_TEMP_C: f64 = 999.9;

/// Time constant with which the drift of a new electrode's offset dies away, days (common practice, no source).
pub const DRIFT_SETTLES_DAYS: f64 = 20.0;

/// Nodes and weights of the integral `∫ f(x)·e^(−x) dx` from 0 up.
///
/// - **Source** Abramowitz and Stegun (1964), Handbook of Mathematical Functions, table 25.9, n = 4 (from memory).
const LAGUERRE: [(f64, f64); 4] = [
    (0.322_547_689_619, 0.603_154_104_342),
    (1.745_761_101_158, 0.357_418_692_438),
    (4.536_620_296_921, 0.038_887_908_515),
    (9.395_070_912_301, 0.000_539_294_706),
];

/// Something that goes wrong with a probe and stays wrong.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Fault {
    /// The glass wears out: slope lost in addition, fraction of the theoretical slope per day.
    WornGlass {
        /// Per day.
        slope_loss_per_day: f64,
    },
    /// The glass is cracked: the potential stays near the offset whatever the liquid does.
    BrokenGlass,
    /// The temperature sensor's circuit is open.
    TemperatureSensorOpen,
}

/// An electrode whose truth is known at any time, before and after it was commissioned.
#[derive(Debug, Clone, PartialEq)]
pub struct SimulatedElectrode {
    /// Glass or metal.
    pub kind: ProbeKind,
    /// Makes its noise and its wandering its own.
    pub seed: u64,
    /// When `offset_mv` and `slope` hold.
    pub commissioned: Timestamp,
    /// Offset when commissioned, mV.
    pub offset_mv: f64,
    /// Drift of the offset when commissioned, mV per day; it dies away over [`DRIFT_SETTLES_DAYS`].
    pub drift_mv_per_day: f64,
    /// Wandering of the offset, mV per square root of a day.
    pub wander_mv: f64,
    /// Slope when commissioned, fraction of the theoretical one (ORP: not used).
    pub slope: f64,
    /// Ordinary ageing: slope lost per day.
    pub slope_loss_per_day: f64,
    /// Noise of a single reading, standard deviation, mV.
    pub noise_mv: f64,
    /// Time constant of the response, s.
    pub response_s: f64,
    /// What goes wrong, and since when.
    pub faults: Vec<(Timestamp, Fault)>,
}

/// What a meter shows: whole tenths of a millivolt and of a degree.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Shown {
    /// mV.
    pub mv: f64,
    /// °C; [`OPEN_SENSOR_TEMP_C`] when the sensor is open.
    pub temp_c: f64,
}

impl SimulatedElectrode {
    /// True offset at `t`, mV.
    pub fn offset_mv_at(&self, t: Timestamp) -> f64 {
        let days = t.days_since(self.commissioned);
        let wandered = walk_at(self.seed, days) - walk_at(self.seed, 0.0);
        let drifted_days = DRIFT_SETTLES_DAYS * (1.0 - (-days / DRIFT_SETTLES_DAYS).exp());
        self.offset_mv + self.drift_mv_per_day * drifted_days + self.wander_mv * wandered
    }

    /// True slope at `t`, fraction of the theoretical one, not below 0; always 1 for an ORP probe.
    pub fn slope_at(&self, t: Timestamp) -> f64 {
        if self.kind == ProbeKind::Orp {
            return 1.0;
        }
        let mut slope = self.slope - self.slope_loss_per_day * t.days_since(self.commissioned);
        for (since, fault) in self.faults.iter().filter(|(since, _)| *since <= t) {
            match fault {
                Fault::WornGlass { slope_loss_per_day } => {
                    slope -= slope_loss_per_day * t.days_since(*since);
                }
                Fault::BrokenGlass => slope *= 0.02,
                Fault::TemperatureSensorOpen => {}
            }
        }
        slope.max(0.0)
    }

    /// True potential at `t` in a liquid of `value` (pH, or ORP in mV against the probe's reference) and `temp_c`, without noise, mV.
    pub fn potential_mv_at(&self, t: Timestamp, value: f64, temp_c: f64) -> f64 {
        match self.kind {
            // E = o + s·k(T)·(7 − pH)
            ProbeKind::Ph => {
                self.offset_mv_at(t) + self.slope_at(t) * theoretical_slope(temp_c) * (7.0 - value)
            }
            ProbeKind::Orp => value + self.offset_mv_at(t),
        }
    }

    /// A single noisy reading at `t`, settled in a liquid of `value` and `temp_c`, mV.
    pub fn mv_at(&self, t: Timestamp, value: f64, temp_c: f64) -> f64 {
        self.potential_mv_at(t, value, temp_c) + self.noise_mv * normal_at(!self.seed, t.ms())
    }

    /// What its meter shows at `t` in `liquid`: the potential lags behind the liquid, the temperature is the probe's own.
    pub fn shown_in(&self, liquid: &Liquid, t: Timestamp) -> Shown {
        let now = liquid.at(t);
        // First-order response: y(t) = ∫ f(t − τ·x)·e^(−x) dx, which needs no state and so can be asked at any time.
        #[expect(
            clippy::cast_possible_truncation,
            reason = "milliseconds of some minutes"
        )]
        let seen: f64 = LAGUERRE
            .iter()
            .map(|(x, weight)| {
                let ago_ms = (x * self.response_s * 1000.0) as i64;
                weight * liquid.at(t.plus_ms(-ago_ms)).value
            })
            .sum();
        let open = self
            .faults
            .iter()
            .any(|(since, fault)| *since <= t && *fault == Fault::TemperatureSensorOpen);
        Shown {
            mv: tenths(self.mv_at(t, seen, now.temp_c)),
            temp_c: if open {
                OPEN_SENSOR_TEMP_C
            } else {
                tenths(now.temp_c)
            },
        }
    }
}

/// Theoretical slope at `temp_c`, mV/pH: proportional to the absolute temperature.
fn theoretical_slope(temp_c: f64) -> f64 {
    nernst_slope(Celsius::STANDARD).mv_per_ph() * (temp_c + 273.15) / Kelvin::STANDARD.k()
}

/// Rounded as a meter with one decimal shows it.
pub fn tenths(figure: f64) -> f64 {
    (figure * 10.0).round() / 10.0
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::simulation::liquid::LiquidKind;

    const DAY_MS: i64 = 86_400_000;
    const START: Timestamp = Timestamp::from_ms(1_700_000_000_000);

    fn electrode() -> SimulatedElectrode {
        SimulatedElectrode {
            kind: ProbeKind::Ph,
            seed: 3,
            commissioned: START,
            offset_mv: -4.0,
            drift_mv_per_day: 0.1,
            wander_mv: 0.3,
            slope: 0.985,
            slope_loss_per_day: 0.0002,
            noise_mv: 0.1,
            response_s: 12.0,
            faults: Vec::new(),
        }
    }

    #[test]
    fn the_same_question_gives_the_same_answer_in_any_order() {
        let liquid = Liquid {
            kind: LiquidKind::Raceway,
            seed: 5,
            noon_utc_h: 16.2,
        };
        let electrode = electrode();
        let ask = |n: i64| electrode.shown_in(&liquid, START.plus_ms(n * 61_337));
        let forward: Vec<_> = (0..500).map(ask).collect();
        let mut backward: Vec<_> = (0..500).rev().map(ask).collect();
        backward.reverse();
        assert_eq!(forward, backward);
    }

    #[test]
    fn readings_in_two_buffers_give_the_true_slope_and_offset_back() {
        let electrode = electrode();
        let at = START.plus_ms(20 * DAY_MS);
        let temp_c = 25.0;
        // Bare pH figures: here only the line between them counts.
        let (acid, neutral) = (
            electrode.potential_mv_at(at, 4.0, temp_c),
            electrode.potential_mv_at(at, 7.0, temp_c),
        );
        // Source: theoretical slope 59.159 mV/pH at 25 °C, computed from ln(10)·R·T/F with the exact constants (CODATA 2022).
        let slope = (acid - neutral) / 3.0 / 59.159;
        // 0.985 less twenty days of 0.0002.
        assert!((slope - 0.981).abs() < 2e-5, "slope {slope}");
        assert!((neutral - electrode.offset_mv_at(at)).abs() < 1e-9);
    }

    #[test]
    fn a_response_lags_behind_a_change_and_then_arrives() {
        let tank = Liquid {
            kind: LiquidKind::NeutralisationTank,
            seed: 5,
            noon_utc_h: 16.2,
        };
        let fast = SimulatedElectrode {
            response_s: 0.0,
            noise_mv: 0.0,
            ..electrode()
        };
        let slow = SimulatedElectrode {
            response_s: 30.0,
            ..fast.clone()
        };
        let (mut lag_mv, mut n) = (0.0, 0.0);
        for second in 0..26 * 60 {
            let at = START.plus_ms(second * 1000);
            let exact = fast.potential_mv_at(at, tank.at(at).value, tank.at(at).temp_c);
            assert!((fast.shown_in(&tank, at).mv - exact).abs() < 0.06);
            let earlier = at.plus_ms(-30_000);
            let expected =
                fast.potential_mv_at(earlier, tank.at(earlier).value, tank.at(at).temp_c);
            lag_mv += (slow.shown_in(&tank, at).mv - expected).abs();
            n += 1.0;
        }
        // A ramp seen through a first-order response is the ramp one time constant earlier; only the turns differ.
        assert!(lag_mv / n < 3.0, "mean difference {} mV", lag_mv / n);
    }

    #[test]
    fn faults_begin_at_their_time_and_not_before() {
        let pond = Liquid {
            kind: LiquidKind::Pond { swing_ph: 1.0 },
            seed: 2,
            noon_utc_h: 16.2,
        };
        let since = START.plus_ms(10 * DAY_MS);
        let with = |fault| SimulatedElectrode {
            faults: vec![(since, fault)],
            ..electrode()
        };
        let healthy = electrode();
        let (before, after) = (since.plus_ms(-1), since.plus_ms(10 * DAY_MS));

        let worn = with(Fault::WornGlass {
            slope_loss_per_day: 0.01,
        });
        assert!((worn.slope_at(before) - healthy.slope_at(before)).abs() < 1e-12);
        assert!((healthy.slope_at(after) - worn.slope_at(after) - 0.1).abs() < 1e-12);

        let open = with(Fault::TemperatureSensorOpen);
        assert_eq!(
            open.shown_in(&pond, before),
            healthy.shown_in(&pond, before)
        );
        assert!((open.shown_in(&pond, after).temp_c - OPEN_SENSOR_TEMP_C).abs() < 1e-9);

        let broken = with(Fault::BrokenGlass);
        let apart =
            broken.potential_mv_at(after, 4.0, 20.0) - broken.potential_mv_at(after, 9.0, 20.0);
        assert!(apart.abs() < 10.0, "{apart} mV between pH 4 and pH 9");
    }
}
