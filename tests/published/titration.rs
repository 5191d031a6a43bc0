//! Source: A. G. Dickson, C. L. Sabine & J. R. Christian (eds.), Guide to Best Practices for Ocean CO2 Measurements, PICES Special
//! Publication 3 (2007), SOP 3b, worked example of the open-cell alkalinity titration: electrode potentials at 24.25 °C, result published.
//! Equations of the same SOP; constants of bisulfate by Dickson (1990), J. Chem. Thermodyn. 22:113, and of hydrogen fluoride by Dickson & Riley
//! (1979), Mar. Chem. 7:89, all from memory.

use super::{assert_close, celsius};
use halfcell::electrode::convert::{Inputs, to_ph};
use halfcell::electrode::history::ElectrodeLine;
use halfcell::electrode::slope::nernst_slope;
use halfcell::electrode::units::Millivolts;

/// Potentials of the worked example, mV, at 3.50 mL to 4.50 mL of acid, every 0.05 mL.
const MV: [f64; 21] = [
    186.07, 188.93, 191.50, 193.84, 196.01, 198.00, 199.86, 201.59, 203.21, 204.73, 206.17, 207.53,
    208.80, 210.02, 211.20, 212.33, 213.41, 214.46, 215.45, 216.41, 217.32,
];
const TEMP_C: f64 = 24.25;

/// pH (−log10 of the total hydrogen ion concentration) by an electrode with this E0 and the theoretical slope.
fn ph(mv: f64, e0_mv: f64) -> f64 {
    let line = ElectrodeLine {
        offset_mv: e0_mv - 7.0 * nernst_slope(celsius(TEMP_C)).mv_per_ph(),
        slope: 1.0,
        var_offset_mv2: 0.0,
        var_slope: 0.0,
        cov_mv: 0.0,
    };
    let inputs = Inputs {
        u_mv: 0.05,
        u_temp_c: 0.02,
        u_junction: 0.0,
    };
    to_ph(
        Millivolts::new(mv).unwrap(),
        celsius(TEMP_C),
        &line,
        7.0,
        &inputs,
    )
    .unwrap()
    .value
}

/// Excess of acid found by the electrode over acid added, mol per kg of sample, at every point.
fn residuals(alkalinity: f64, e0_mv: f64) -> Vec<f64> {
    let (salinity, sample_g, acid, acid_density) = (33.923_f64, 140.32, 0.100_46, 1.023_93);
    let t = TEMP_C + 273.15;
    let sulfate = 0.14 / 96.062 * salinity / 1.806_55;
    let fluoride = 0.000_067 / 18.998 * salinity / 1.806_55;
    let ionic = 19.924 * salinity / (1000.0 - 1.005 * salinity);
    let per_solution = (1.0 - 0.001_005 * salinity).ln();
    let ks = (-4276.1 / t + 141.328 - 23.093 * t.ln()
        + (-13_856.0 / t + 324.57 - 47.986 * t.ln()) * ionic.sqrt()
        + (35_474.0 / t - 771.54 + 114.723 * t.ln()) * ionic
        - 2698.0 / t * ionic.powf(1.5)
        + 1776.0 / t * ionic * ionic
        + per_solution)
        .exp();
    let z = 1.0 + sulfate / ks;
    let kf = (1590.2 / t - 12.641 + 1.525 * ionic.sqrt() + per_solution).exp() * z;
    (0_u8..)
        .zip(MV)
        .map(|(i, mv)| {
            let acid_g = (3.5 + 0.05 * f64::from(i)) * acid_density;
            let h = 10.0_f64.powf(-ph(mv, e0_mv));
            alkalinity
                + sulfate / (1.0 + ks * z / h)
                + fluoride / (1.0 + kf / h)
                + (sample_g + acid_g) / sample_g * (h / z)
                - acid_g / sample_g * acid
        })
        .collect()
}

#[test]
fn the_published_alkalinity_and_e0_come_out_of_the_raw_potentials() {
    // Gauss–Newton on the two unknowns, from the first estimates by extrapolation.
    let (mut alkalinity, mut e0) = (2263.377e-6, 394.2634);
    for _ in 0..10 {
        let at = residuals(alkalinity, e0);
        let moved = residuals(alkalinity, e0 + 1e-3);
        let (mut a11, mut a12, mut a22, mut b1, mut b2) = (0.0, 0.0, 0.0, 0.0, 0.0);
        for (r, m) in at.iter().zip(&moved) {
            // ∂r/∂alkalinity = 1.
            let j = (m - r) / 1e-3;
            a11 += 1.0;
            a12 += j;
            a22 += j * j;
            b1 -= r;
            b2 -= j * r;
        }
        let det = a11 * a22 - a12 * a12;
        alkalinity += (a22 * b1 - a12 * b2) / det;
        e0 += (a11 * b2 - a12 * b1) / det;
    }
    println!("alkalinity {:.3} µmol/kg, E0 {e0:.4} mV", alkalinity * 1e6);
    // Published: 2260.06 µmol/kg and 394.401 mV. Tolerances: what another program gets from the same potentials, 2260.08 and 394.391.
    assert_close("alkalinity, µmol/kg", alkalinity * 1e6, 2260.06, 0.05);
    assert_close("E0, mV", e0, 394.401, 0.015);
}

#[test]
fn single_potentials_come_out_to_four_digits() {
    // Source: computed for this project in another language from the published E0, five digits; three of the 21 potentials.
    for (mv, want) in [(186.07, 3.5304), (206.17, 3.189_79), (215.45, 3.032_53)] {
        assert_close(&format!("{mv} mV"), ph(mv, 394.401), want, 0.6e-4);
    }
}

#[test]
fn one_point_in_tris_buffer_with_the_theoretical_slope() {
    // Source: SOP 6a of the same guide: pH = pH_S + (E_S − E)/k(T), pH_S 8.13, E_S −71.54 mV; two readings of a titration kept in an open
    // package for sea-water chemistry, single figures.
    let line = ElectrodeLine {
        offset_mv: -71.54,
        slope: 1.0,
        var_offset_mv2: 0.0,
        var_slope: 0.0,
        cov_mv: 0.0,
    };
    let inputs = Inputs {
        u_mv: 0.1,
        u_temp_c: 0.1,
        u_junction: 0.0,
    };
    for (mv, temp_c, want) in [(199.2061, 23.1574, 3.524_98), (236.4369, 23.5833, 2.899_26)] {
        let got = to_ph(
            Millivolts::new(mv).unwrap(),
            celsius(temp_c),
            &line,
            8.13,
            &inputs,
        )
        .unwrap();
        assert_close(&format!("{mv} mV"), got.value, want, 0.000_05);
    }
}
