//! Source: `calibration_vectors.json`, computed for this project by weighted least squares in one general library and, for two points,
//! confirmed by 200 000-draw Monte Carlo within 2 %; invented readings. Formulas: effective variance (York and Deming's practice), GUM
//! (JCGM 100:2008) equation 13.

use super::assert_close;
use halfcell::electrode::convert::{Inputs, to_ph};
use halfcell::electrode::fit::{Fit, Limits, fit};
use halfcell::electrode::history::StandardReading;
use halfcell::electrode::units::{Celsius, Millivolts};
use serde_json::Value;

pub(crate) fn cases() -> Vec<Value> {
    let all: Value = serde_json::from_str(include_str!("calibration_vectors.json")).unwrap();
    all["cases"].as_array().unwrap().clone()
}

pub(crate) fn figure(of: &Value, key: &str) -> f64 {
    of[key].as_f64().unwrap_or_else(|| panic!("no `{key}`"))
}

pub(crate) fn readings(case: &Value) -> Vec<StandardReading> {
    case["points"]
        .as_array()
        .unwrap()
        .iter()
        .map(|p| StandardReading {
            name: figure(p, "buffer_ph").to_string(),
            lot: None,
            value: figure(p, "buffer_ph"),
            u_value: figure(p, "u_buffer_ph"),
            value_per_c: figure(p, "dph_dt"),
            mv: figure(p, "mv"),
            u_mv: figure(p, "u_mv"),
            temp_c: figure(p, "temp_c"),
            u_temp_c: figure(p, "u_temp_c"),
        })
        .collect()
}

fn fitted(case: &Value) -> Fit {
    fit(
        &readings(case),
        figure(case, "ph_iso"),
        None,
        &Limits::default(),
    )
    .unwrap()
}

#[test]
fn every_line_comes_out_to_the_printed_digits() {
    for case in cases() {
        let name = case["name"].as_str().unwrap();
        let want = &case["expected"];
        let got = fitted(&case);
        // Half of the last printed digit of each figure, and a little for printed figures on the edge.
        assert_close(name, got.line.offset_mv, figure(want, "offset_mv"), 0.6e-6);
        assert_close(name, got.line.slope, figure(want, "slope"), 0.6e-8);
        assert_close(
            name,
            got.line.var_offset_mv2.sqrt(),
            figure(want, "u_offset_mv"),
            0.6e-6,
        );
        assert_close(
            name,
            got.line.var_slope.sqrt(),
            figure(want, "u_slope"),
            0.6e-8,
        );
        assert_close(
            name,
            got.line.cov_mv,
            figure(want, "cov_offset_slope"),
            0.6e-9,
        );
        assert_close(name, got.chi2, figure(want, "chi2"), 0.6e-6);
        for (got, want) in got
            .residuals_mv
            .iter()
            .zip(want["residuals_mv"].as_array().unwrap())
        {
            assert_close(name, *got, want.as_f64().unwrap(), 0.6e-6);
        }
    }
}

#[test]
fn every_sample_comes_out_to_the_printed_digits() {
    for case in cases() {
        let line = fitted(&case).line;
        for sample in case["samples"].as_array().unwrap() {
            let inputs = Inputs {
                u_mv: figure(sample, "u_mv"),
                u_temp_c: figure(sample, "u_temp_c"),
                u_junction: figure(sample, "u_junction_ph"),
            };
            let got = to_ph(
                Millivolts::new(figure(sample, "mv")).unwrap(),
                Celsius::new(figure(sample, "temp_c")).unwrap(),
                &line,
                figure(&case, "ph_iso"),
                &inputs,
            )
            .unwrap();
            let name = case["name"].as_str().unwrap();
            assert_close(name, got.value, figure(sample, "ph"), 0.6e-6);
            assert_close(name, got.u, figure(sample, "u"), 0.6e-6);
            assert_close(name, got.u / 2.0, figure(sample, "u_c"), 0.6e-6);
        }
    }
}
