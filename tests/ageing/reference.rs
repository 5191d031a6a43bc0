//! The filter and smoother against a general state-space library: statsmodels, through `tests/reference/ageing.py`.

use crate::support::{after_days, check};
use halfcell::electrode::ageing::{Noise, Observation, Prior, State, Track};
use halfcell::electrode::history::ProbeKind;
use serde_json::{Value, json};
use std::io::Write as _;
use std::path::Path;
use std::process::Command;

/// The Python to ask: `HALFCELL_PYTHON`, else `python3`.
fn python() -> Command {
    Command::new(std::env::var_os("HALFCELL_PYTHON").unwrap_or_else(|| "python3".into()))
}

fn can_ask() -> bool {
    python()
        .args(["-c", "import statsmodels, scipy"])
        .output()
        .is_ok_and(|o| o.status.success())
}

fn figures(value: &Value) -> Vec<f64> {
    match value {
        Value::Array(all) => all.iter().flat_map(figures).collect(),
        one => vec![one.as_f64().unwrap()],
    }
}

fn given(checks: &[Observation], noise: &Noise, prior: &Prior, ask: &[f64]) -> Value {
    let start_cov: Vec<Vec<f64>> = (0..4)
        .map(|i| {
            let variance = [
                prior.start_offset_sd_mv.powi(2),
                noise.var_drift(),
                prior.start_slope_sd.powi(2),
                noise.var_slope_rate(),
            ];
            (0..4)
                .map(|j| if i == j { variance[i] } else { 0.0 })
                .collect()
        })
        .collect();
    json!({
        "noise": {
            "q_offset": noise.q_offset, "q_drift": noise.q_drift, "tau_days": noise.tau_days,
            "q_slope": noise.q_slope, "slope_rate": noise.slope_rate,
            "q_slope_rate": noise.q_slope_rate, "slope_tau_days": noise.slope_tau_days,
        },
        "start_mean": [0.0, 0.0, prior.start_slope, 0.0],
        "start_cov": start_cov,
        "ask": ask,
        "events": checks.iter().map(|c| json!({
            "day": c.at.days_since(after_days(0.0)),
            "shared_var_mv2": c.shared_var_mv2,
            "rows": c.rows.iter().map(|r| json!({"h": r.h, "y_mv": r.y_mv, "var_mv2": r.var_mv2})).collect::<Vec<_>>(),
        })).collect::<Vec<_>>(),
    })
}

/// Means within 1e-8 of a standard deviation, covariances within 1e-8 of the two it lies between.
fn agree(what: &str, day: f64, ours: &State, mean: &Value, cov: &Value) {
    let (mean, cov) = (figures(mean), figures(cov));
    for i in 0..4 {
        let sd = ours.cov[i][i].sqrt();
        let off = (ours.mean[i] - mean[i]).abs() / sd;
        assert!(
            off < 1e-8,
            "{what} mean {i} on day {day}: {} against {}",
            ours.mean[i],
            mean[i]
        );
        for j in 0..4 {
            let off = (ours.cov[i][j] - cov[4 * i + j]).abs() / (sd * ours.cov[j][j].sqrt());
            assert!(
                off < 1e-8,
                "{what} covariance {i},{j} on day {day}: {} against {}",
                ours.cov[i][j],
                cov[4 * i + j]
            );
        }
    }
}

#[test]
fn filter_and_smoother_agree_with_a_general_library() {
    if !can_ask() {
        assert!(
            std::env::var_os("CI").is_none(),
            "CI must compare against the general library: HALFCELL_PYTHON names no Python that has statsmodels"
        );
        // Straight to the terminal: the test runner would swallow a print.
        let warning = "NOT CHECKED against the general library: install statsmodels for python3, or name a Python that has it in HALFCELL_PYTHON";
        writeln!(std::io::stderr(), "{warning}").unwrap();
        return;
    }
    let noise = Noise {
        q_drift: 4e-4,
        ..Noise::glass()
    };
    let prior = Prior::only(noise, ProbeKind::Ph);
    let checks: Vec<Observation> = [
        (0.0, &[4.0, 7.0][..], 1.0, 0.982),
        (7.25, &[7.0], 2.1, 0.982),
        (7.26, &[7.0], 1.8, 0.982),
        (31.0, &[4.0, 7.0, 10.0], 0.4, 0.976),
        (45.5, &[9.18], -1.3, 0.973),
        (59.0, &[4.0, 7.0], -3.0, 0.975),
        (140.0, &[4.0, 7.0], -6.0, 0.960),
    ]
    .iter()
    .zip(1..)
    .map(|((day, phs, offset, slope), id)| check(id, *day, phs, (*offset, *slope), 0.4))
    .collect();
    let ask: Vec<f64> = (0..160).map(f64::from).collect();
    let folder = tempfile::tempdir().unwrap();
    let file = folder.path().join("given.json");
    std::fs::write(&file, given(&checks, &noise, &prior, &ask).to_string()).unwrap();
    let script = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/reference/ageing.py");
    let said = python().arg(script).arg(&file).output().unwrap();
    assert!(
        said.status.success(),
        "{}",
        String::from_utf8_lossy(&said.stderr)
    );
    let said: Value = serde_json::from_slice(&said.stdout).unwrap();
    let track = Track::run(&checks, &prior).unwrap();
    for (day, theirs) in ask.iter().zip(said["answers"].as_array().unwrap()) {
        let t = after_days(*day);
        agree(
            "filtered",
            *day,
            &track.filtered_at(t).unwrap(),
            &theirs["filtered"],
            &theirs["filtered_cov"],
        );
        agree(
            "smoothed",
            *day,
            &track.smoothed_at(t).unwrap(),
            &theirs["smoothed"],
            &theirs["smoothed_cov"],
        );
    }
    let theirs = said["log_likelihood"].as_f64().unwrap();
    assert!(
        (track.log_likelihood() - theirs).abs() < 1e-8 * theirs.abs(),
        "log likelihood {} against {theirs}",
        track.log_likelihood()
    );
}
