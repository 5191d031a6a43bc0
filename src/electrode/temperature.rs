//! # Temperature sensors, and which temperatures a probe can be in
//!
//! in: a sensor's resistance, or °C as received. out: °C, or why there is none. Never a figure in place of a missing one.

use super::slope::{HIGHEST_C, LOWEST_C};
use super::units::{Celsius, Ohms};

/// Why there is no temperature.
#[derive(Debug, Clone, Copy, PartialEq, thiserror::Error)]
pub enum NoTemperature {
    /// Nothing was received.
    #[error("no temperature was received")]
    Missing,
    /// The sensor or its cable is open.
    #[error("{figure} {unit} says that the temperature sensor is open")]
    Open {
        /// The figure as received.
        figure: f64,
        /// Its unit.
        unit: &'static str,
    },
    /// The sensor or its cable is shorted.
    #[error("{figure} {unit} says that the temperature sensor is shorted")]
    Short {
        /// The figure as received.
        figure: f64,
        /// Its unit.
        unit: &'static str,
    },
    /// No liquid a probe sits in has it.
    #[error("{0} is no temperature a probe can be in: {LOWEST_C} °C to {HIGHEST_C} °C")]
    Impossible(Celsius),
}

impl NoTemperature {
    /// What to do about it.
    pub const fn remedy(&self) -> &'static str {
        match self {
            Self::Missing => {
                "connect the temperature sensor, or give the point a fixed temperature"
            }
            Self::Open { .. } => {
                "check the sensor's plug and cable for a break; replace the sensor"
            }
            Self::Short { .. } => "check the sensor's plug and cable for water; replace the sensor",
            Self::Impossible(_) => {
                "check the sensor's kind and scale in the configuration, then the sensor"
            }
        }
    }
}

/// Above this a figure in °C means an open sensor (common practice: a platinum sensor's resistance runs away upwards).
pub const OPEN_ABOVE_C: f64 = 150.0;
/// Below this a figure in °C means a shorted sensor (common practice, for platinum).
pub const SHORT_BELOW_C: f64 = -30.0;

/// Whether a probe can be in a liquid of temperature `t`: −5 °C to 130 °C. Limits: common practice, no source.
///
/// The words open and short are those of platinum, which most meters have; a thermistor that is open reads cold instead.
///
/// # Errors
/// [`NoTemperature::Short`] below −30 °C, [`NoTemperature::Open`] above 150 °C, [`NoTemperature::Impossible`] between there and the range.
pub fn judge(t: Celsius) -> Result<Celsius, NoTemperature> {
    let figure = t.c();
    if figure > OPEN_ABOVE_C {
        Err(NoTemperature::Open {
            figure, unit: "°C"
        })
    } else if figure < SHORT_BELOW_C {
        Err(NoTemperature::Short {
            figure, unit: "°C"
        })
    } else if (LOWEST_C..=HIGHEST_C).contains(&figure) {
        Ok(t)
    } else {
        Err(NoTemperature::Impossible(t))
    }
}

/// A platinum resistance thermometer by its resistance at 0 °C.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Platinum {
    r0_ohm: f64,
}

/// 100 Ω at 0 °C.
pub const PT100: Platinum = Platinum { r0_ohm: 100.0 };
/// 1000 Ω at 0 °C.
pub const PT1000: Platinum = Platinum { r0_ohm: 1000.0 };

// Callendar–Van Dusen coefficients of IEC 60751:2008 (ITS-90), seen in an open engineering library.
const A: f64 = 3.9083e-3;
const B: f64 = -5.775e-7;
const C: f64 = -4.183e-12;

impl Platinum {
    /// Resistance at temperature `t`: `R = R0·(1 + A·t + B·t²)`, below 0 °C with `+ C·(t − 100)·t³`.
    ///
    /// - **Range** the standard's −200 °C to 850 °C; outside, the limits of the range are taken.
    /// - **Source** IEC 60751:2008 (from memory), A = 3.9083e-3, B = −5.775e-7, C = −4.183e-12.
    pub fn resistance(self, t: Celsius) -> Ohms {
        let c = t.c().clamp(-200.0, 850.0);
        Ohms::new(self.r0_ohm * ratio(c)).unwrap_or(Ohms::ZERO)
    }

    /// Temperature at resistance `r`, the inverse of [`Platinum::resistance`] within 1e-6 °C.
    ///
    /// # Errors
    /// [`NoTemperature::Short`] below 0.6·R0 (−100 °C), [`NoTemperature::Open`] above 2·R0 (266 °C): limits ours, from the equation.
    pub fn temperature(self, r: Ohms) -> Result<Celsius, NoTemperature> {
        let figure = r.ohm();
        let w = figure / self.r0_ohm;
        if w < 0.6 {
            return Err(NoTemperature::Short { figure, unit: "Ω" });
        }
        if w > 2.0 {
            return Err(NoTemperature::Open { figure, unit: "Ω" });
        }
        // t = (−A + √(A² − 4·B·(1 − W)))/(2·B); below 0 °C three Newton steps from there.
        let mut c = (-A + (A * A - 4.0 * B * (1.0 - w)).sqrt()) / (2.0 * B);
        if w < 1.0 {
            for _ in 0..3 {
                let slope = A + 2.0 * B * c + C * c * c * (4.0 * c - 300.0);
                c -= (ratio(c) - w) / slope;
            }
        }
        Celsius::new(c).map_err(|_| NoTemperature::Open { figure, unit: "Ω" })
    }
}

/// R/R0 at `c` °C.
fn ratio(c: f64) -> f64 {
    let below = if c < 0.0 {
        C * (c - 100.0) * c * c * c
    } else {
        0.0
    };
    1.0 + c * (A + c * B) + below
}

/// A thermistor (NTC). There is no default: R25 and B, or a, b and c, come from its data sheet.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Thermistor {
    /// `1/T = 1/298.15 K + ln(R/R25)/B`.
    Beta {
        /// Resistance at 25 °C.
        r25: Ohms,
        /// B, K.
        b_k: f64,
    },
    /// `1/T = a + b·ln R + c·(ln R)³`, R in Ω: Steinhart & Hart, Deep-Sea Research 15 (1968) 497 (from memory).
    SteinhartHart {
        /// a, 1/K.
        a: f64,
        /// b, 1/K.
        b: f64,
        /// c, 1/K.
        c: f64,
    },
}

impl Thermistor {
    /// Temperature at resistance `r`.
    ///
    /// # Errors
    /// [`NoTemperature::Open`] below −50 °C or for a resistance its equation has no temperature for, [`NoTemperature::Short`] above 200 °C:
    /// limits ours (a 10 kΩ part then has more than 500 kΩ, or less than 100 Ω).
    pub fn temperature(self, r: Ohms) -> Result<Celsius, NoTemperature> {
        let figure = r.ohm();
        let short = NoTemperature::Short { figure, unit: "Ω" };
        let open = NoTemperature::Open { figure, unit: "Ω" };
        if figure <= 0.0 {
            return Err(short);
        }
        let per_k = match self {
            Self::Beta { r25, b_k } => 1.0 / 298.15 + (figure / r25.ohm()).ln() / b_k,
            Self::SteinhartHart { a, b, c } => {
                let ln = figure.ln();
                a + ln * (b + c * ln * ln)
            }
        };
        let c = 1.0 / per_k - 273.15;
        if per_k <= 0.0 || c > 200.0 {
            return Err(short);
        }
        if c < -50.0 {
            return Err(open);
        }
        Celsius::new(c).map_err(|_| open)
    }

    /// Resistance at temperature `t`, the inverse of [`Thermistor::temperature`]; `None` where the equation gives none.
    pub fn resistance(self, t: Celsius) -> Option<Ohms> {
        let per_k = 1.0 / t.to_kelvin().k();
        let ohm = match self {
            Self::Beta { r25, b_k } => r25.ohm() * (b_k * (per_k - 1.0 / 298.15)).exp(),
            Self::SteinhartHart { a, b, c } => {
                // Cardano: x = (a − 1/T)/c, y = √((b/3c)³ + x²/4), ln R = ∛(y − x/2) − ∛(y + x/2)
                let x = (a - per_k) / c;
                let y = ((b / (3.0 * c)).powi(3) + x * x / 4.0).sqrt();
                ((y - x / 2.0).cbrt() - (y + x / 2.0).cbrt()).exp()
            }
        };
        Ohms::new(ohm).ok()
    }
}
