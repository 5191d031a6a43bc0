//! # Water: what an operator derives from pH
//!
//! in: pH and temperature with their uncertainty, salinity, alkalinity, total ammonia. out: un-ionized ammonia, free carbon dioxide,
//! pKw, each with u and with the method's name.
//! Always: 1. outside the validity of its source a figure is an error, never an extrapolation. 2. pH is that of a probe calibrated in
//! ordinary buffers (the NBS scale). Not here: limits for stock; they are the operator's.

pub mod ammonia;
pub mod carbonate;
pub mod ionisation;
mod seawater;

use crate::electrode::convert::Converted;
use crate::electrode::units::Celsius;

/// The liquid as measured.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Liquid {
    /// pH by a probe calibrated in ordinary buffers, with its expanded uncertainty.
    pub ph: Converted,
    /// Temperature.
    pub temp: Celsius,
    /// Standard uncertainty of the temperature (k = 1), °C.
    pub u_temp_c: f64,
    /// Salinity, g/kg.
    pub salinity_g_kg: f64,
}

/// A figure with the method that made it.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Derived {
    /// Value and expanded uncertainty (k = 2), in the unit the function says.
    pub figure: Converted,
    /// The method's name, as reports print it.
    pub method: &'static str,
}

/// An input outside the validity of the source.
#[derive(Debug, Clone, Copy, PartialEq, thiserror::Error)]
#[error(
    "{what} {figure} {unit} is outside {lowest} to {highest} {unit}, where {source_name} holds"
)]
pub struct NotValid {
    /// Which input.
    pub what: &'static str,
    /// Its figure.
    pub figure: f64,
    /// Its unit.
    pub unit: &'static str,
    /// Lowest.
    pub lowest: f64,
    /// Highest.
    pub highest: f64,
    /// The source of the range.
    pub source_name: &'static str,
}

/// Refuses a figure outside `[lowest, highest]`.
fn within(
    (what, unit): (&'static str, &'static str),
    figure: f64,
    [lowest, highest]: [f64; 2],
    source_name: &'static str,
) -> Result<(), NotValid> {
    if figure >= lowest && figure <= highest {
        return Ok(());
    }
    Err(NotValid {
        what,
        figure,
        unit,
        lowest,
        highest,
        source_name,
    })
}

/// Ionic strength of sea water of a salinity, mol/kg: `I = 19.9273·S/(1000 − 1.005109·S)`.
///
/// Source: US EPA 440/5-88-004 (1989), after Whitfield 1974.
fn ionic_strength_of_salinity(salinity_g_kg: f64) -> f64 {
    19.9273 * salinity_g_kg / (1_000.0 - 1.005_109 * salinity_g_kg)
}
