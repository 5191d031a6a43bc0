//! # Free carbon dioxide from pH and alkalinity

use super::ionisation::log_kw;
use super::{Derived, Liquid, NotValid, ionic_strength_of_salinity, seawater, within};
use crate::electrode::convert::Converted;
use crate::electrode::units::Celsius;

/// Grams per mole of CO2.
const CO2_G_MOL: f64 = 44.0095;
/// From this salinity on sea-water constants are taken (ours: there both ways meet within 1–2 %).
const SEA_FROM_G_KG: f64 = 5.0;
/// Standard uncertainty of the fresh-water way itself (ours: ions besides the carbonates, and ion pairs, in hard water).
const U_MODEL_FRESH: f64 = 0.025;
/// Likewise of the sea-water way: the conversion of an ordinary probe's pH is worth ±0.05 pH (Dickson et al. 2007, from memory).
const U_MODEL_SEA: f64 = 0.06;

const FRESH: &str = "Plummer & Busenberg 1982, Davies";
const LUEKER: &str = "Lueker 2000, pH scale by Takahashi 1982";
const MILLERO: &str = "Millero 2010, pH scale by Takahashi 1982";

/// Free CO2 (dissolved CO2 and carbonic acid), mg/L, from alkalinity in meq/L with its standard uncertainty.
///
/// - **Range** pH 5–9.5, alkalinity 0.1–50 meq/L, salinity 0–45 g/kg, 0–50 °C (2–35 °C for Lueker's constants, Millero's outside them).
/// - **u** from pH, temperature, alkalinity and the method's own 5 % (fresh) or 12 % (from salinity 5 on), k = 2.
/// - **Source** below salinity 5 Plummer & Busenberg (1982), Geochim. Cosmochim. Acta 46, 1011, activities by Davies; from 19 on
///   Lueker et al. (2000); between, Millero (2010).
///
/// # Errors
/// [`NotValid`] outside the range, or where nothing of the alkalinity is carbonate.
pub fn free_co2_mg_l(
    liquid: &Liquid,
    (alkalinity_meq_l, u_alkalinity_meq_l): (f64, f64),
) -> Result<Derived, NotValid> {
    let (ph, t, s) = (liquid.ph.value, liquid.temp, liquid.salinity_g_kg);
    within(("pH", "pH"), ph, [5.0, 9.5], FRESH)?;
    within(("temperature", "°C"), t.c(), [0.0, 50.0], FRESH)?;
    within(("salinity", "g/kg"), s, [0.0, 45.0], MILLERO)?;
    within(
        ("alkalinity", "meq/L"),
        alkalinity_meq_l,
        [0.1, 50.0],
        FRESH,
    )?;
    let (method, u_model) = method_of(t, s);
    let co2 = |ph: f64, t: Celsius, alkalinity: f64| co2_mg_l(method, ph, t, s, alkalinity);
    let value = co2(ph, t, alkalinity_meq_l);
    within(("free CO2", "mg/L"), value, [0.0, f64::MAX], method)?;
    // The expression is smooth, so central differences over a hundredth of a unit give its partial derivatives to five digits.
    let shifted = |c: f64| Celsius::new(t.c() + c).unwrap_or(t);
    let per_ph = (co2(ph + 0.01, t, alkalinity_meq_l) - co2(ph - 0.01, t, alkalinity_meq_l)) / 0.02;
    let per_c = (co2(ph, shifted(0.01), alkalinity_meq_l)
        - co2(ph, shifted(-0.01), alkalinity_meq_l))
        / 0.02;
    let step = 0.01 * alkalinity_meq_l;
    let per_meq_l =
        (co2(ph, t, alkalinity_meq_l + step) - co2(ph, t, alkalinity_meq_l - step)) / (2.0 * step);
    let u_c = (per_ph * liquid.ph.u / 2.0)
        .hypot(per_c * liquid.u_temp_c)
        .hypot(per_meq_l * u_alkalinity_meq_l)
        .hypot(u_model * value);
    Ok(Derived {
        figure: Converted {
            value,
            u: 2.0 * u_c,
        },
        method,
    })
}

fn method_of(t: Celsius, s: f64) -> (&'static str, f64) {
    if s < SEA_FROM_G_KG {
        (FRESH, U_MODEL_FRESH)
    } else if (19.0..=43.0).contains(&s) && (2.0..=35.0).contains(&t.c()) {
        (LUEKER, U_MODEL_SEA)
    } else {
        (MILLERO, U_MODEL_SEA)
    }
}

fn co2_mg_l(method: &str, ph: f64, t: Celsius, s: f64, alkalinity_meq_l: f64) -> f64 {
    let density = seawater::density_kg_l(t, s);
    let alkalinity = alkalinity_meq_l * 1e-3 / density;
    let co2_mol_kg = if method == FRESH {
        fresh(ph, t, s, alkalinity)
    } else {
        // An ordinary probe's pH on the sea-water scale: [H]SWS = 10^−pH(NBS)/fH.
        let h_sws = 10_f64.powf(-ph) / seawater::activity_coefficient(t, s);
        let ratio = seawater::total_over_seawater(t, s);
        if method == LUEKER {
            sea(
                h_sws * ratio,
                1.0,
                t,
                s,
                (alkalinity, seawater::carbonic_lueker(t, s)),
            )
        } else {
            sea(
                h_sws,
                ratio,
                t,
                s,
                (alkalinity, seawater::carbonic_millero(t, s)),
            )
        }
    };
    co2_mol_kg * CO2_G_MOL * 1e3 * density
}

/// Fresh water, mol/kg: `A_c = Alk − [OH⁻] + [H⁺]`, `[HCO3⁻] = A_c/(1 + 2·K2·γ1/(γ2·aH))`, `[CO2] = aH·γ1·[HCO3⁻]/(K1·γ0)`.
///
/// The ionic strength is that of the carbonates with single-charged cations, or of the salinity where that is more.
fn fresh(ph: f64, t: Celsius, s: f64, alkalinity: f64) -> f64 {
    let k = t.to_kelvin().k();
    let lg = k.log10();
    let log_k1 =
        -356.3094 - 0.060_919_64 * k + 21_834.37 / k + 126.8339 * lg - 1_684_915.0 / (k * k);
    let log_k2 = -107.8871 - 0.032_528_49 * k + 5_151.79 / k + 38.925_61 * lg - 563_713.9 / (k * k);
    let (k1, k2, kw) = (
        10_f64.powf(log_k1),
        10_f64.powf(log_k2),
        10_f64.powf(log_kw(t)),
    );
    let a_h = 10_f64.powf(-ph);
    let of_salt = ionic_strength_of_salinity(s);
    let mut ionic = alkalinity.max(of_salt);
    let mut co2 = 0.0;
    // The ionic strength hardly moves after the first pass; the third changes nothing that is printed.
    for _ in 0..3 {
        let root = ionic.sqrt();
        // Davies: log γz = −A·z²·(√I/(1 + √I) − 0.3·I), γ0 = 10^(0.1·I).
        let davies = -debye_hueckel_a(t) * (root / (1.0 + root) - 0.3 * ionic);
        let (g1, g2, g0) = (
            10_f64.powf(davies),
            10_f64.powf(4.0 * davies),
            10_f64.powf(0.1 * ionic),
        );
        let hydroxide = kw / (a_h * g1);
        let carbonate_alkalinity = alkalinity - hydroxide + a_h / g1;
        let carbonate_per_bicarbonate = k2 * g1 / (g2 * a_h);
        let bicarbonate = carbonate_alkalinity / (1.0 + 2.0 * carbonate_per_bicarbonate);
        let carbonate = bicarbonate * carbonate_per_bicarbonate;
        co2 = a_h * g1 * bicarbonate / (k1 * g0);
        ionic = (0.5 * (alkalinity + bicarbonate + 4.0 * carbonate + hydroxide)).max(of_salt);
    }
    co2
}

/// `A = 1.82483e6·√ρ/(ε·T)^1.5`, ε of water by Truesdell & Jones (1974), J. Res. USGS 2, 233.
fn debye_hueckel_a(t: Celsius) -> f64 {
    let k = t.to_kelvin().k();
    let dielectric = 2_727.586 + 0.622_410_7 * k - 466.9151 * k.ln() - 52_000.87 / k;
    1.824_83e6 * seawater::density_kg_l(t, 0.0).sqrt() / (dielectric * k).powf(1.5)
}

/// Sea water, mol/kg, on the scale of `h` and of the carbonic constants; `ratio` is total over that scale.
fn sea(h: f64, ratio: f64, t: Celsius, s: f64, (alkalinity, [k1, k2]): (f64, [f64; 2])) -> f64 {
    let k_borate = seawater::k_borate(t, s) / ratio;
    let borate = seawater::total_boron(s) * k_borate / (k_borate + h);
    let carbonate_alkalinity = alkalinity - borate - seawater::k_water(t, s) / ratio / h + h;
    carbonate_alkalinity / (k1 / h + 2.0 * k1 * k2 / (h * h))
}
