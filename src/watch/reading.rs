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

/// A potential as it is stored: whole µV.
pub fn round_mv(mv: f64) -> f64 {
    (mv * 1_000.0).round() / 1_000.0
}

/// A temperature as it is stored: whole m°C.
pub fn round_temp_c(temp_c: f64) -> f64 {
    (temp_c * 1_000.0).round() / 1_000.0
}

/// A value as it is stored: whole 1e-4 pH, or whole 1e-2 mV for ORP.
pub fn round_value(kind: ProbeKind, value: f64) -> f64 {
    let steps = match kind {
        ProbeKind::Ph => 10_000.0,
        ProbeKind::Orp => 100.0,
    };
    (value * steps).round() / steps
}

/// An uncertainty as it is stored: whole 1e-6 of the unit.
pub fn round_u(u: f64) -> f64 {
    (u * 1_000_000.0).round() / 1_000_000.0
}
