//! # Sea water: scales, borate, density
//!
//! Constants as in Dickson, Sabine & Christian (2007) and the sources named at each; mol/kg of sea water.

use crate::electrode::units::Celsius;

/// The hydrogen ion's activity coefficient with the liquid junction of an ordinary probe, which turns a pH in ordinary buffers (NBS)
/// into the sea-water scale: `fH = 1.2948 − 0.002036·T + (0.0004607 − 1.475e-6·T)·S²`.
///
/// Source: Takahashi et al. (1982), in GEOSECS Pacific Expedition vol. 3. Not valid below S 5.
pub(super) fn activity_coefficient(t: Celsius, s: f64) -> f64 {
    let t = t.to_kelvin().k();
    1.2948 - 0.002_036 * t + (0.000_460_7 - 1.475e-6 * t) * s * s
}

/// Total over sea-water scale, `[H]T/[H]SWS`: sulfate counts in both, fluoride in the second only.
pub(super) fn total_over_seawater(t: Celsius, s: f64) -> f64 {
    let t = t.to_kelvin().k();
    let ionic = 19.924 * s / (1_000.0 - 1.005 * s);
    let per_kg = 1.0 - 0.001_005 * s;
    let root = ionic.sqrt();
    // Bisulfate: Dickson (1990), J. Chem. Thermodyn. 22, 113 (from memory).
    let ln_k_sulfate = -4_276.1 / t + 141.328 - 23.093 * t.ln()
        + (-13_856.0 / t + 324.57 - 47.986 * t.ln()) * root
        + (35_474.0 / t - 771.54 + 114.723 * t.ln()) * ionic
        - 2_698.0 / t * ionic * root
        + 1_776.0 / t * ionic * ionic;
    // Hydrogen fluoride: Dickson & Riley (1979), Mar. Chem. 7, 89 (from memory).
    let ln_k_fluoride = 1_590.2 / t - 12.641 + 1.525 * root;
    let sulfate = 0.14 / 96.062 * s / 1.806_55 / (ln_k_sulfate.exp() * per_kg);
    let fluoride = 0.000_067 / 18.998 * s / 1.806_55 / (ln_k_fluoride.exp() * per_kg);
    (1.0 + sulfate) / (1.0 + sulfate + fluoride)
}

/// Boric acid's constant on the total scale. Source: Dickson (1990), Deep-Sea Res. 37, 755.
pub(super) fn k_borate(t: Celsius, s: f64) -> f64 {
    let t = t.to_kelvin().k();
    let root = s.sqrt();
    ((-8_966.90 - 2_890.53 * root - 77.942 * s + 1.728 * s * root - 0.0996 * s * s) / t
        + 148.0248
        + 137.1942 * root
        + 1.621_42 * s
        - (24.4344 + 25.085 * root + 0.2474 * s) * t.ln()
        + 0.053_105 * root * t)
        .exp()
}

/// Total boron, mol/kg. Source: Uppström (1974), Deep-Sea Res. 21, 161: 415.7 µmol/kg at S 35.
pub(super) fn total_boron(s: f64) -> f64 {
    415.7e-6 * s / 35.0
}

/// Water's ionic product on the total scale. Source: Millero (1995), as in Dickson, Sabine & Christian (2007).
pub(super) fn k_water(t: Celsius, s: f64) -> f64 {
    let t = t.to_kelvin().k();
    (148.9652 - 13_847.26 / t - 23.6521 * t.ln()
        + (118.67 / t - 5.977 + 1.0495 * t.ln()) * s.sqrt()
        - 0.016_15 * s)
        .exp()
}

/// First and second constant of carbonic acid on the total scale, S 19–43, 2–35 °C. Source: Lueker, Dickson & Keeling (2000), Mar. Chem. 70, 105.
pub(super) fn carbonic_lueker(t: Celsius, s: f64) -> [f64; 2] {
    let t = t.to_kelvin().k();
    let pk1 = 3_633.86 / t - 61.2172 + 9.677_70 * t.ln() - 0.011_555 * s + 0.000_115_2 * s * s;
    let pk2 = 471.78 / t + 25.9290 - 3.169_67 * t.ln() - 0.017_81 * s + 0.000_112_2 * s * s;
    [10_f64.powf(-pk1), 10_f64.powf(-pk2)]
}

/// The same on the sea-water scale, S 1–50, 0–50 °C. Source: Millero (2010), Mar. Freshwater Res. 61, 139.
pub(super) fn carbonic_millero(t: Celsius, s: f64) -> [f64; 2] {
    let t = t.to_kelvin().k();
    let root = s.sqrt();
    let pk1 = -126.340_48 + 6_320.813 / t + 19.568_224 * t.ln() + 13.4038 * root + 0.032_06 * s
        - 5.242e-5 * s * s
        + (-530.659 * root - 5.8210 * s) / t
        - 2.0664 * root * t.ln();
    let pk2 = -90.183_33 + 5_143.692 / t + 14.613_358 * t.ln() + 21.3728 * root + 0.1218 * s
        - 3.688e-4 * s * s
        + (-788.289 * root - 19.189 * s) / t
        - 3.374 * root * t.ln();
    [10_f64.powf(-pk1), 10_f64.powf(-pk2)]
}

/// Density at the surface, kg/L, S 0–42, 0–40 °C. Source: Millero & Poisson (1981), Deep-Sea Res. 28A, 625 (UNESCO; from memory).
pub(super) fn density_kg_l(t: Celsius, s: f64) -> f64 {
    let c = t.c();
    let poly = |terms: &[f64]| terms.iter().rev().fold(0.0, |sum, term| sum * c + term);
    let fresh = poly(&[
        999.842_594,
        6.793_952e-2,
        -9.095_290e-3,
        1.001_685e-4,
        -1.120_083e-6,
        6.536_332e-9,
    ]);
    let a = poly(&[0.824_493, -4.0899e-3, 7.6438e-5, -8.2467e-7, 5.3875e-9]);
    let b = poly(&[-5.724_66e-3, 1.0227e-4, -1.6546e-6]);
    (fresh + a * s + b * s * s.sqrt() + 4.8314e-4 * s * s) / 1_000.0
}
