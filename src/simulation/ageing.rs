//! # Electrodes that age in different ways, with the truth known
//!
//! in: a way of ageing, a seed. out: true offset and slope at any time, what buffers and liquids would read.
//! The ways are made of other stuff than the filter assumes: walks with heavy tails, straight trends, saw-teeth, powers of time, jumps.
//! Magnitudes: common practice, no source.

use crate::electrode::ageing::Draws;
use crate::electrode::history::StandardReading;
use crate::electrode::slope::SLOPE_PER_KELVIN;

/// A way of ageing.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Ageing {
    /// A walk and a slow trend of the offset, slope slowly down.
    Ordinary,
    /// A walk whose steps now and then are large.
    HeavyTailed,
    /// A straight trend of the offset, little walk.
    Trending,
    /// Fouls between cleanings, each of which takes most of it away.
    SawTooth,
    /// Ordinary for some months, then the reference fouls: the offset runs away, faster and faster.
    FoulingReference,
    /// Ordinary for some months, then the glass wears: the slope falls, faster and faster.
    WearingGlass,
    /// Ordinary, with jumps nobody declared.
    Jumping,
    /// Turns between restless and quiet every few months.
    Regimes,
}

impl Ageing {
    /// Every one.
    pub const ALL: [Self; 8] = [
        Self::Ordinary,
        Self::HeavyTailed,
        Self::Trending,
        Self::SawTooth,
        Self::FoulingReference,
        Self::WearingGlass,
        Self::Jumping,
        Self::Regimes,
    ];
}

/// Steps of a life, per day.
const STEPS_PER_DAY: usize = 4;

/// The truth about one electrode, four times a day.
#[derive(Debug, Clone)]
pub struct Life {
    offset_mv: Vec<f64>,
    slope: Vec<f64>,
    /// When the way changes (fouling or wear begins), days; 0 where nothing changes.
    pub turns_at_days: f64,
}

impl Life {
    /// An electrode of this way, `n_days` long; `cleanings`: days on which somebody cleans it.
    #[expect(clippy::cast_precision_loss, reason = "some thousand steps")]
    pub fn new(way: Ageing, seed: u64, n_days: usize, cleanings: &[f64]) -> Self {
        let mut draws = Draws::new(seed);
        let dt = 1.0 / STEPS_PER_DAY as f64;
        // 0.7 to 2.5 mV per √week, half of the probes between 1.0 and 1.7.
        let walk = 1.3 * (0.4 * draws.normal()).exp().clamp(0.55, 1.9) / 7.0_f64.sqrt();
        let wear = -0.002 - 0.008 * draws.uniform();
        let slope_walk = 0.003 / 30.0_f64.sqrt();
        let trend = 0.08 * draws.normal();
        let steady = (0.10 + 0.10 * draws.uniform()) * draws.normal().signum();
        let turns_at_days = match way {
            Ageing::FoulingReference | Ageing::WearingGlass => 60.0 + 100.0 * draws.uniform(),
            _ => 0.0,
        };
        let severity = 0.6 + 0.8 * draws.uniform();
        let side = draws.normal().signum();
        let mut regime = (1.0, 0.0);
        let mut level = 4.0 * draws.normal();
        let mut slope = 0.985 + 0.008 * draws.normal();
        let mut tooth = 0.0;
        let mut drift = trend;
        let mut life = Self {
            offset_mv: Vec::with_capacity(n_days * STEPS_PER_DAY),
            slope: Vec::with_capacity(n_days * STEPS_PER_DAY),
            turns_at_days,
        };
        for step in 0..n_days * STEPS_PER_DAY {
            let t = step as f64 * dt;
            let since = (t - turns_at_days).max(0.0);
            let mut shock = draws.normal();
            let mut rate = drift;
            match way {
                Ageing::Ordinary => {
                    drift += -drift * dt / 60.0 + 0.08 * (2.0 * dt / 60.0).sqrt() * draws.normal();
                }
                Ageing::HeavyTailed => {
                    // Student's t with 3 degrees, scaled to unit variance.
                    let chi2 = (0..3).map(|_| draws.normal().powi(2)).sum::<f64>();
                    shock /= chi2.sqrt();
                    rate = 0.0;
                }
                Ageing::Trending => {
                    rate = steady;
                    shock *= 0.3;
                }
                Ageing::SawTooth => {
                    tooth += 0.15 * severity * side * dt;
                    if cleanings.iter().any(|c| (c - t) > 0.0 && (c - t) <= dt) {
                        tooth *= 0.2;
                    }
                    shock *= 0.6;
                }
                Ageing::FoulingReference => rate += side * severity * 0.8 * since / 100.0,
                Ageing::WearingGlass => {}
                Ageing::Jumping => {
                    if draws.uniform() < dt / 240.0 {
                        level += (5.0 + 10.0 * draws.uniform()) * draws.normal().signum();
                    }
                }
                Ageing::Regimes => {
                    if regime.1 <= t {
                        regime = (
                            if regime.0 > 1.0 { 0.4 } else { 2.2 },
                            t + 50.0 + 80.0 * draws.uniform(),
                        );
                    }
                    shock *= regime.0;
                    rate = 0.0;
                }
            }
            level += rate * dt + walk * dt.sqrt() * shock;
            let worn = if way == Ageing::WearingGlass {
                severity * 0.06 * since / 60.0
            } else {
                0.0
            };
            slope += (wear - worn.min(0.10)) / 30.0 * dt + slope_walk * dt.sqrt() * draws.normal();
            life.offset_mv.push(level + tooth);
            life.slope.push(slope.max(0.5));
        }
        life
    }

    /// True offset mV and slope at `days`, the nearest step before.
    pub fn at(&self, days: f64) -> (f64, f64) {
        #[expect(
            clippy::cast_possible_truncation,
            clippy::cast_sign_loss,
            clippy::cast_precision_loss,
            reason = "days of a life, not negative"
        )]
        let step = ((days * STEPS_PER_DAY as f64) as usize).min(self.offset_mv.len() - 1);
        (self.offset_mv[step], self.slope[step])
    }

    /// Millivolts in a liquid of `ph` at `temp_c`.
    pub fn mv(&self, days: f64, ph: f64, temp_c: f64) -> f64 {
        let (offset, slope) = self.at(days);
        offset + slope * SLOPE_PER_KELVIN * (temp_c + 273.15) * (7.0 - ph)
    }

    /// What a technician reads in buffers of these pH: each bottle off by 0.005 pH, each reading by 0.2 mV, the thermometer by 0.2 °C,
    /// and one junction error of 0.01 pH for the whole visit.
    pub fn bench(&self, days: f64, phs: &[f64], draws: &mut Draws) -> Vec<StandardReading> {
        let junction_mv = 0.58 * draws.normal();
        phs.iter()
            .map(|ph| {
                let temp_c = 20.0;
                let bottle = ph + 0.005 * draws.normal();
                StandardReading {
                    name: format!("{ph}"),
                    lot: None,
                    value: *ph,
                    u_value: 0.005,
                    value_per_c: 0.0,
                    mv: self.mv(days, bottle, temp_c + 0.2 * draws.normal())
                        + junction_mv
                        + 0.2 * draws.normal(),
                    u_mv: 0.2,
                    temp_c,
                    u_temp_c: 0.2,
                }
            })
            .collect()
    }
}
