//! # Where glass does not answer to hydrogen ions alone: sodium (alkaline) error and acid error
//!
//! in: a pH as converted, and what is known of the glass and the sodium. out: whether the error is possible, and u with it counted in.
//! Always: the value stands as converted; only u and the flag speak of the error.

use super::convert::Converted;

/// Above this pH the sodium error is flagged when nothing better is known: general glass, common practice.
pub const SODIUM_ABOVE_PH: f64 = 12.0;
/// Below this pH the acid error is flagged: common practice.
pub const ACID_BELOW_PH: f64 = 0.5;
/// With glass and sodium known, the sodium error is flagged from this shift on, pH (ours: what a third buffer may be off at half its window).
pub const SODIUM_SHIFT_FLAGGED: f64 = 0.025;

/// An error of the glass that is possible at a reading.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum GlassError {
    /// Reads low: sodium ions count as hydrogen ions.
    Sodium,
    /// Reads high: the acid changes the glass's surface.
    Acid,
}

/// What is known of the glass and of the sodium in the liquid.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Sodium {
    /// Selectivity K of the glass for sodium over hydrogen ions; 1e-11 to 1e-14 (common practice; the maker states it).
    pub selectivity: f64,
    /// Activity of sodium ions, mol/L; for dilute liquids its concentration.
    pub activity_mol_l: f64,
}

/// Which error of the glass is possible at `ph`: acid below 0.5; sodium above 12, or, with `sodium` known, where it shifts the reading by
/// more than [`SODIUM_SHIFT_FLAGGED`].
pub fn glass_error(ph: f64, sodium: Option<&Sodium>) -> Option<GlassError> {
    if ph < ACID_BELOW_PH {
        return Some(GlassError::Acid);
    }
    let possible = match sodium {
        None => ph > SODIUM_ABOVE_PH,
        Some(sodium) => sodium_shift(ph, sodium).is_none_or(|shift| shift > SODIUM_SHIFT_FLAGGED),
    };
    possible.then_some(GlassError::Sodium)
}

/// How much too low a reading of `ph` is because of sodium, in pH, never negative; `None` when sodium alone explains the reading.
///
/// `E = E0 + k·log10(a_H + K·a_Na)` (Nikolsky–Eisenman; Eisenman 1967, from memory), so with `10^−pH = a_H + K·a_Na` as read:
/// shift = `−log10(1 − K·a_Na·10^pH)`.
pub fn sodium_shift(ph: f64, sodium: &Sodium) -> Option<f64> {
    let share = sodium.selectivity * sodium.activity_mol_l * 10.0_f64.powf(ph);
    (share < 1.0).then(|| -(-share).ln_1p() / std::f64::consts::LN_10)
}

/// The pH with the sodium error counted into u, the value as it was: `u + shift`, the way of GUM (JCGM 100:2008, F.2.4.5) with a
/// known error that is not corrected. `None` when sodium alone explains the reading.
pub fn with_sodium(ph: Converted, sodium: &Sodium) -> Option<Converted> {
    sodium_shift(ph.value, sodium).map(|shift| Converted {
        value: ph.value,
        u: ph.u + shift,
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_molar_sodium_liquid_reads_a_tenth_to_three_tenths_low_at_ph_13() {
        // Source: practice sheet, section 4, common practice: general glass at 1 mol/L sodium reads 0.1 to 0.3 low near pH 13.
        for (selectivity, low) in [(2.6e-14, 0.1), (1.0e-13, 0.301)] {
            // True pH 13: the electrode shows −log10(1e-13 + K).
            let shown = -(1e-13_f64 + selectivity).log10();
            let sodium = Sodium {
                selectivity,
                activity_mol_l: 1.0,
            };
            let shift = sodium_shift(shown, &sodium).unwrap();
            assert!((shift - low).abs() < 0.001, "{selectivity}: {shift}");
            assert!((shown + shift - 13.0).abs() < 1e-9, "{shown} + {shift}");
        }
    }

    #[test]
    fn without_knowledge_the_flag_stands_beyond_12_and_below_one_half() {
        assert_eq!(glass_error(0.499, None), Some(GlassError::Acid));
        assert_eq!(glass_error(0.5, None), None);
        assert_eq!(glass_error(12.0, None), None);
        assert_eq!(glass_error(12.001, None), Some(GlassError::Sodium));
    }

    #[test]
    fn with_knowledge_the_flag_follows_the_shift() {
        let good_glass = Sodium {
            selectivity: 1e-14,
            activity_mol_l: 0.1,
        };
        // K·a·10^pH at pH 12.5 is 0.0032: a shift of 0.0014 pH, computed by hand.
        assert_eq!(glass_error(12.5, Some(&good_glass)), None);
        // At pH 13.75 it is 0.056: 0.0251 pH.
        assert_eq!(
            glass_error(13.75, Some(&good_glass)),
            Some(GlassError::Sodium)
        );
        assert_eq!(glass_error(13.74, Some(&good_glass)), None);
        let poor_glass = Sodium {
            selectivity: 1e-11,
            activity_mol_l: 1.0,
        };
        assert_eq!(
            glass_error(11.1, Some(&poor_glass)),
            Some(GlassError::Sodium),
            "sodium alone explains it"
        );
        assert_eq!(sodium_shift(11.1, &poor_glass), None);
        // K·a·10^pH of exactly 1: there is no hydrogen ion left to read.
        let at_the_edge = Sodium {
            selectivity: 1.0,
            activity_mol_l: 1.0,
        };
        assert_eq!(sodium_shift(0.0, &at_the_edge), None);
    }

    #[test]
    fn sodium_widens_u_and_leaves_the_value() {
        let sodium = Sodium {
            selectivity: 1e-13,
            activity_mol_l: 0.5,
        };
        let read = Converted {
            value: 12.7,
            u: 0.04,
        };
        let with = with_sodium(read, &sodium).unwrap();
        // 0.5e-13·10^12.7 = 0.250594; −log10(0.749406) = 0.125283, computed by hand.
        assert!((with.u - 0.165_283).abs() < 1e-6, "{with:?}");
        assert!((with.value - 12.7).abs() < 1e-12);
    }
}
