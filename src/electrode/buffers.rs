//! # pH buffers by temperature

use super::named::named;

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
