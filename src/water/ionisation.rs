//! # Ionisation of water

use super::{Derived, NotValid, within};
use crate::electrode::convert::Converted;
use crate::electrode::units::Celsius;

const PLUMMER_BUSENBERG: &str = "Plummer & Busenberg 1982";

/// `log10 Kw = −283.971 − 0.05069842·T + 13323/T + 102.24447·log10 T − 1119669/T²`, T in kelvin.
///
/// Source: Plummer & Busenberg (1982), Geochim. Cosmochim. Acta 46, 1011, as in the databases of PHREEQC.
pub(super) fn log_kw(t: Celsius) -> f64 {
    let t = t.to_kelvin().k();
    -283.971 - 0.050_698_42 * t + 13_323.0 / t + 102.244_47 * t.log10() - 1_119_669.0 / (t * t)
}

/// pKw, minus the logarithm of water's ionic product (fresh water, activities): 13.998 at 25 °C; half of it is the neutral pH.
///
/// - **Range** 0 to 50 °C. **u** from the temperature's and 0.01 of the expression (its departure from Harned & Owen's table).
/// - **Source** as [`log_kw`]'s: Plummer & Busenberg 1982.
///
/// # Errors
/// [`NotValid`] outside the range.
pub fn pkw(t: Celsius, u_temp_c: f64) -> Result<Derived, NotValid> {
    within(("temperature", "°C"), t.c(), [0.0, 50.0], PLUMMER_BUSENBERG)?;
    // dpKw/dT by the derivative of the expression above.
    let k = t.to_kelvin().k();
    let per_c = 0.050_698_42 + 13_323.0 / (k * k)
        - 102.244_47 / (k * std::f64::consts::LN_10)
        - 2.0 * 1_119_669.0 / (k * k * k);
    let u_c = (per_c * u_temp_c).hypot(0.005);
    Ok(Derived {
        figure: Converted {
            value: -log_kw(t),
            u: 2.0 * u_c,
        },
        method: PLUMMER_BUSENBERG,
    })
}
