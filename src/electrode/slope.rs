//! # The theoretical slope of an electrode
//!
//! Constants of CODATA 2022, exact by the definition of the SI units (SI Brochure, 9th edition, 2019, section 2.2).

use super::units::{Celsius, MillivoltsPerPh};

/// Boltzmann constant, J/K, exact.
pub const BOLTZMANN: f64 = 1.380_649e-23;
/// Avogadro constant, 1/mol, exact.
pub const AVOGADRO: f64 = 6.022_140_76e23;
/// Elementary charge, C, exact.
pub const ELEMENTARY_CHARGE: f64 = 1.602_176_634e-19;
/// Molar gas constant `R = k·N_A`, J/(mol·K), exact; 8.314 462 618 153 24.
pub const GAS_CONSTANT: f64 = BOLTZMANN * AVOGADRO;
/// Faraday constant `F = e·N_A`, C/mol, exact; 96 485.332 123 310 018 4.
pub const FARADAY: f64 = ELEMENTARY_CHARGE * AVOGADRO;
/// `1000·ln(10)·R/F`: the slope per kelvin, mV/(pH·K); 0.198 421.
pub const SLOPE_PER_KELVIN: f64 = 1000.0 * std::f64::consts::LN_10 * GAS_CONSTANT / FARADAY;

/// Lowest temperature at which a slope is taken for true, °C: a probe in undercooled brine.
pub const LOWEST_C: f64 = -5.0;
/// Highest temperature at which a slope is taken for true, °C: a probe under steam sterilisation.
pub const HIGHEST_C: f64 = 130.0;

/// Theoretical (Nernst) slope at temperature `t`: `k(T) = ln(10)·R·T/F`, T in kelvin.
///
/// - **Range** meaningful for an electrode from −5 °C to 130 °C ([`LOWEST_C`], [`HIGHEST_C`]); checked against the computed table
///   over that range (`tests/published/slope.rs`). Not refused outside, since the equation holds.
/// - **Result** positive; 59.159 mV/pH at 25 °C. A probe's slope is this times its slope fraction.
/// - **Source** Nernst equation for one electron; R and F exact (CODATA 2022).
///
/// ```
/// use halfcell::electrode::{slope::nernst_slope, units::Celsius};
/// assert!((nernst_slope(Celsius::STANDARD).mv_per_ph() - 59.159).abs() < 0.0005);
/// ```
pub const fn nernst_slope(t: Celsius) -> MillivoltsPerPh {
    match MillivoltsPerPh::new(SLOPE_PER_KELVIN * t.to_kelvin().k()) {
        Ok(slope) => slope,
        // Unreachable: 0 K to 2 273.15 K give 0 to 451.1 mV/pH.
        Err(_) => MillivoltsPerPh::ZERO,
    }
}
