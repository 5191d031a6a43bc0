//! # pH buffers by temperature
//!
//! in: a buffer and its temperature. out: its pH there, with u and temperature coefficient. Outside its table: an error.

mod table;

use super::named::named;
use super::standard::{OutsideTable, Row, StandardValue, interpolate};
use super::units::Celsius;

named! {
    /// A buffer of the IUPAC/NIST compositions.
    BufferKind, "buffer" {
        /// Potassium tetroxalate, about pH 1.68.
        Tetroxalate = "tetroxalate",
        /// Potassium hydrogen tartrate, saturated at 25 °C, about pH 3.56.
        Tartrate = "tartrate",
        /// Potassium dihydrogen citrate, about pH 3.78.
        Citrate = "citrate",
        /// Potassium hydrogen phthalate, about pH 4.01.
        Phthalate = "phthalate",
        /// Equimolal phosphate, about pH 6.87.
        Phosphate = "phosphate",
        /// Phosphate 1:3.5, about pH 7.41.
        Phosphate1To3_5 = "phosphate-1-3.5",
        /// Borax, about pH 9.18.
        Borax = "borax",
        /// Carbonate and hydrogen carbonate, about pH 10.01.
        Carbonate = "carbonate",
        /// Calcium hydroxide, saturated at 25 °C, about pH 12.45.
        CalciumHydroxide = "calcium-hydroxide",
    }
}

/// pH of a standard buffer at temperature `t`.
///
/// - **Result** pH, its standard uncertainty (k = 1) as the publication states it for a primary standard (0.0015 to 0.01 pH; a bottle
///   from the trade is worth less, see [`U_BOTTLE`]), and its temperature coefficient per °C.
/// - **Range** the table's: 0–95 °C (tetroxalate, phthalate, phosphate, borax), 25–95 °C (tartrate), 0–50 °C (citrate,
///   phosphate 1:3.5, carbonate), 0–60 °C (calcium hydroxide).
/// - **Source** Buck et al., Pure Appl. Chem. 74 (2002) 2169, Table 2; Bates, J. Res. NBS 66A (1962) 179 (both from memory); between
///   rows a cubic through them, which brings left-out rows back within 0.0015 pH.
///
/// # Errors
/// [`OutsideTable`] outside the table's temperatures.
///
/// ```
/// use halfcell::electrode::{buffers::{BufferKind, buffer_at}, units::Celsius};
/// let phthalate = buffer_at(BufferKind::Phthalate, Celsius::STANDARD).unwrap();
/// assert!((phthalate.value - 4.005).abs() < 1e-12);
/// ```
pub fn buffer_at(kind: BufferKind, t: Celsius) -> Result<StandardValue, OutsideTable> {
    interpolate(rows(kind), kind.name(), t)
}

/// Standard uncertainty (k = 1) of a fresh bottle that came without a certificate, pH. Common practice, no source.
pub const U_BOTTLE: f64 = 0.02;

const fn rows(kind: BufferKind) -> &'static [Row] {
    match kind {
        BufferKind::Tetroxalate => table::TETROXALATE,
        BufferKind::Tartrate => table::TARTRATE,
        BufferKind::Citrate => table::CITRATE,
        BufferKind::Phthalate => table::PHTHALATE,
        BufferKind::Phosphate => table::PHOSPHATE,
        BufferKind::Phosphate1To3_5 => table::PHOSPHATE_1_TO_3_5,
        BufferKind::Borax => table::BORAX,
        BufferKind::Carbonate => table::CARBONATE,
        BufferKind::CalciumHydroxide => table::CALCIUM_HYDROXIDE,
    }
}
