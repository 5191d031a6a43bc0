//! Source: `nernst.csv`, computed as ln(10)·R·T/F with R and F exact (CODATA 2018 and 2022 agree).

use super::{assert_close, celsius, rows};
use halfcell::electrode::slope::{FARADAY, GAS_CONSTANT, nernst_slope};

#[test]
fn the_constants_are_those_of_codata_2022() {
    // Source: CODATA 2022 (NIST, Fundamental Physical Constants), printed to 10 digits and more: 8.314 462 618… J/(mol·K), 96 485.332 12… C/mol.
    assert_close("R", GAS_CONSTANT, 8.314_462_618_153_24, 1e-14);
    assert_close("F", FARADAY, 96_485.332_123_310_02, 2e-11);
}

#[test]
fn every_row_of_the_slope_table_is_met_to_its_last_digit() {
    for row in rows(include_str!("nernst.csv"), 28) {
        let temp_c = row.figure("temp_c");
        assert_close(
            &format!("k({temp_c} °C)"),
            nernst_slope(celsius(temp_c)).mv_per_ph(),
            row.figure("slope_mv_per_ph"),
            0.5e-6,
        );
    }
}

#[test]
fn the_textbook_slopes_are_met() {
    // Source: common practice: 54.20 mV at 0 °C, 59.16 at 25 °C, 61.54 at 37 °C, 74.04 at 100 °C per pH.
    for (temp_c, slope) in [(0.0, 54.20), (25.0, 59.16), (37.0, 61.54), (100.0, 74.04)] {
        assert_close(
            &format!("k({temp_c} °C)"),
            nernst_slope(celsius(temp_c)).mv_per_ph(),
            slope,
            0.005,
        );
    }
}
