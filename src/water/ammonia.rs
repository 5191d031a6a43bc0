//! # Un-ionized ammonia

use super::{Derived, Liquid, NotValid, ionic_strength_of_salinity, within};
use crate::electrode::convert::Converted;
use std::f64::consts::LN_10;

/// Below this salinity the fresh-water expression is taken, above it the salt-water one; the step in the fraction is below 1 % at
/// 10–25 °C and 7 % at 0 and 35 °C (ours).
const SALT_FROM_G_KG: f64 = 0.5;

/// Standard uncertainty of the fresh-water expression itself, of the fraction (ours: activity of NH4⁺ is left out).
const U_MODEL_FRESH: f64 = 0.025;
/// Likewise of the salt-water expression (ours: published methods part by so much).
const U_MODEL_SALT: f64 = 0.06;

const EMERSON: &str = "Emerson 1975";
const EPA: &str = "EPA 1989";

/// pKa of ammonium with its derivative by temperature, and what it comes from.
struct Constant {
    pka: f64,
    per_c: f64,
    u_model: f64,
    method: &'static str,
}

fn constant(liquid: &Liquid) -> Result<Constant, NotValid> {
    let c = liquid.temp.c();
    if liquid.salinity_g_kg < SALT_FROM_G_KG {
        within(("temperature", "°C"), c, [0.0, 50.0], EMERSON)?;
        // pKa = 0.09018 + 2729.92/T, T = 273.2 + t.    Emerson, Russo, Lund & Thurston (1975), J. Fish. Res. Board Can. 32, 2379.
        let t = 273.2 + c;
        return Ok(Constant {
            pka: 0.090_18 + 2_729.92 / t,
            per_c: -2_729.92 / (t * t),
            u_model: U_MODEL_FRESH,
            method: EMERSON,
        });
    }
    within(("temperature", "°C"), c, [0.0, 40.0], EPA)?;
    // pKa = 9.245 + 0.116·I + 0.0324·(298 − T) + 0.0415·P/T, P = 1 atm.    US EPA 440/5-88-004 (1989).
    let t = liquid.temp.to_kelvin().k();
    let ionic = ionic_strength_of_salinity(liquid.salinity_g_kg);
    Ok(Constant {
        pka: 9.245 + 0.116 * ionic + 0.0324 * (298.0 - t) + 0.0415 / t,
        per_c: -0.0324 - 0.0415 / (t * t),
        u_model: U_MODEL_SALT,
        method: EPA,
    })
}

/// Fraction of total ammonia that is un-ionized NH3: `f = 1/(1 + 10^(pKa − pH))`.
///
/// - **Range** pH 4 to 11, salinity 0 to 40 g/kg; 0–50 °C in fresh, 0–40 °C in salt water.
/// - **u** from pH, temperature and the expression's own 5 % (fresh) or 12 % (salt), k = 2.
/// - **Source** below salinity 0.5 Emerson et al. (1975), J. Fish. Res. Board Can. 32, 2379; above, US EPA 440/5-88-004 (1989).
///
/// # Errors
/// [`NotValid`] outside the range.
pub fn unionized_fraction(liquid: &Liquid) -> Result<Derived, NotValid> {
    within(("salinity", "g/kg"), liquid.salinity_g_kg, [0.0, 40.0], EPA)?;
    let constant = constant(liquid)?;
    within(("pH", "pH"), liquid.ph.value, [4.0, 11.0], constant.method)?;
    let f = 1.0 / (1.0 + 10_f64.powf(constant.pka - liquid.ph.value));
    // ∂f/∂pH = ln10·f·(1 − f); ∂f/∂T = −ln10·f·(1 − f)·dpKa/dT; the expression's own uncertainty acts like one of pKa.
    let slope = LN_10 * f * (1.0 - f);
    let u_ph = slope * liquid.ph.u / 2.0;
    let u_t = slope * constant.per_c * liquid.u_temp_c;
    let u_model = constant.u_model * f * (1.0 - f);
    let u_c = u_ph.hypot(u_t).hypot(u_model);
    Ok(Derived {
        figure: Converted {
            value: f,
            u: 2.0 * u_c,
        },
        method: constant.method,
    })
}

/// Un-ionized ammonia, mg/L as N, from total ammonia nitrogen `total_n_mg_l` with its standard uncertainty.
///
/// # Errors
/// As [`unionized_fraction`]; and for a total outside 0 to 100 mg/L.
pub fn unionized_ammonia_n_mg_l(
    liquid: &Liquid,
    (total_n_mg_l, u_total_n_mg_l): (f64, f64),
) -> Result<Derived, NotValid> {
    within(
        ("total ammonia", "mg/L N"),
        total_n_mg_l,
        [0.0, 100.0],
        EMERSON,
    )?;
    let Derived { figure, method } = unionized_fraction(liquid)?;
    let u_c = (total_n_mg_l * figure.u / 2.0).hypot(figure.value * u_total_n_mg_l);
    Ok(Derived {
        figure: Converted {
            value: total_n_mg_l * figure.value,
            u: 2.0 * u_c,
        },
        method,
    })
}
