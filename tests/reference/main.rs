//! Our figures against independent general libraries, over a grid: `check.py` computes them again and says how far apart they are.
#![expect(
    clippy::unwrap_used,
    clippy::cast_precision_loss,
    reason = "what fails here fails the test; counts are small"
)]

use halfcell::electrode::convert::{Converted, Inputs, to_ph};
use halfcell::electrode::fit::{Limits, fit};
use halfcell::electrode::history::{ElectrodeLine, StandardReading};
use halfcell::electrode::slope::nernst_slope;
use halfcell::electrode::temperature::{PT100, PT1000};
use halfcell::electrode::units::{Celsius, Millivolts};
use halfcell::water::Liquid;
use halfcell::water::ammonia::unionized_fraction;
use halfcell::water::carbonate::free_co2_mg_l;
use halfcell::water::ionisation::pkw;
use std::fmt::Write as _;
use std::io::Write as _;
use std::path::Path;
use std::process::Command;

/// `quantity,inputs separated by ;,ours`.
struct Sheet(String);

impl Sheet {
    fn row(&mut self, quantity: &str, inputs: &[f64], ours: f64) {
        let inputs: Vec<String> = inputs.iter().map(|x| format!("{x:?}")).collect();
        writeln!(self.0, "{quantity},{},{ours:?}", inputs.join(";")).unwrap();
    }
}

fn c(figure: f64) -> Celsius {
    Celsius::new(figure).unwrap()
}

fn liquid(ph: f64, temp_c: f64, salinity_g_kg: f64) -> Liquid {
    Liquid {
        ph: Converted { value: ph, u: 0.0 },
        temp: c(temp_c),
        u_temp_c: 0.0,
        salinity_g_kg,
    }
}

/// `n` evenly spaced figures from `low` to `high`.
fn spaced(low: f64, high: f64, n: usize) -> impl Iterator<Item = f64> {
    (0..n).map(move |i| low + (high - low) * i as f64 / (n - 1) as f64)
}

fn electrode(sheet: &mut Sheet) {
    for t in spaced(-5.0, 130.0, 136) {
        sheet.row("nernst_slope", &[t], nernst_slope(c(t)).mv_per_ph());
    }
    let (offset_mv, slope, var_o, var_s, cov) = (3.2, 0.957, 0.21, 2.3e-6, -1.1e-4);
    let line = ElectrodeLine {
        offset_mv,
        slope,
        var_offset_mv2: var_o,
        var_slope: var_s,
        cov_mv: cov,
    };
    let inputs = Inputs {
        u_mv: 0.3,
        u_temp_c: 0.2,
        u_junction: 0.01,
    };
    for mv in spaced(-350.0, 350.0, 29) {
        for t in spaced(0.0, 90.0, 19) {
            let got = to_ph(Millivolts::new(mv).unwrap(), c(t), &line, 7.0, &inputs).unwrap();
            let given = [mv, t, offset_mv, slope, var_o, var_s, cov];
            sheet.row("ph", &given, got.value);
            sheet.row("u_ph", &given, got.u);
        }
    }
    for t in spaced(-50.0, 200.0, 251) {
        let ohm = PT100.resistance(c(t));
        sheet.row("pt100_ohm", &[t], ohm.ohm());
        sheet.row("pt100_c", &[ohm.ohm()], PT100.temperature(ohm).unwrap().c());
        sheet.row("pt1000_ohm", &[t], PT1000.resistance(c(t)).ohm());
    }
}

/// Weighted straight lines through three to five buffers whose own uncertainty is so small that the weights are those of the millivolts.
fn fits(sheet: &mut Sheet) {
    for n in 0..40 {
        let n_points = 3 + n % 3;
        let reading = |i: usize| {
            let ph = 4.0 + 2.0 * i as f64;
            let wiggle = ((7 * n + 3 * i) % 11) as f64 / 10.0 - 0.5;
            StandardReading {
                name: format!("{ph}"),
                lot: None,
                value: ph,
                u_value: 0.0,
                value_per_c: 0.0,
                mv: 1.5 + 57.3 * (7.0 - ph) + 0.2 * wiggle,
                u_mv: 0.2 + 0.05 * i as f64,
                temp_c: 25.0,
                u_temp_c: 0.0,
            }
        };
        let readings: Vec<StandardReading> = (0..n_points).map(reading).collect();
        let got = fit(&readings, 7.0, None, &Limits::default()).unwrap().line;
        let given: Vec<f64> = readings
            .iter()
            .flat_map(|r| [r.value, r.mv, r.u_mv])
            .collect();
        sheet.row("fit_offset_mv", &given, got.offset_mv);
        sheet.row("fit_slope", &given, got.slope);
        sheet.row("fit_var_offset", &given, got.var_offset_mv2);
        sheet.row("fit_var_slope", &given, got.var_slope);
        sheet.row("fit_cov", &given, got.cov_mv);
    }
}

fn water(sheet: &mut Sheet) {
    for t in spaced(0.0, 50.0, 51) {
        sheet.row("pkw", &[t], pkw(c(t), 0.0).unwrap().figure.value);
    }
    for ph in spaced(6.5, 8.3, 10) {
        for t in spaced(3.0, 33.0, 7) {
            for alk in [0.5, 2.0, 5.0] {
                let got = free_co2_mg_l(&liquid(ph, t, 0.0), (alk, 0.0)).unwrap();
                sheet.row("co2_fresh", &[ph, t, alk], got.figure.value);
            }
            for s in [6.0, 12.0, 18.0, 25.0, 35.0] {
                let got = free_co2_mg_l(&liquid(ph, t, s), (2.3, 0.0)).unwrap();
                sheet.row("co2_sea", &[ph, t, s, 2.3], got.figure.value);
            }
            let fraction = unionized_fraction(&liquid(ph, t, 0.0)).unwrap();
            sheet.row("ammonia_fresh", &[ph, t], fraction.figure.value);
        }
    }
}

#[test]
fn our_figures_are_those_of_independent_libraries() {
    let python = std::env::var_os("HALFCELL_PYTHON").unwrap_or_else(|| "python3".into());
    let has = Command::new(&python)
        .args(["-c", "import numpy, scipy, PyCO2SYS, phreeqpython, gsw"])
        .output()
        .is_ok_and(|said| said.status.success());
    if !has {
        assert!(
            std::env::var_os("CI").is_none(),
            "CI must compare against the independent libraries: HALFCELL_PYTHON names no Python that has them"
        );
        let warning = "NOT CHECKED against independent libraries: name a Python with numpy, scipy, PyCO2SYS, phreeqpython and gsw in HALFCELL_PYTHON";
        writeln!(std::io::stderr(), "{warning}").unwrap();
        return;
    }
    let mut sheet = Sheet(String::new());
    electrode(&mut sheet);
    fits(&mut sheet);
    water(&mut sheet);
    let n = sheet.0.lines().count();
    assert!(n >= 2_000, "only {n} inputs");
    let folder = tempfile::tempdir().unwrap();
    let file = folder.path().join("ours.csv");
    std::fs::write(&file, &sheet.0).unwrap();
    let script = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/reference/check.py");
    let said = Command::new(&python)
        .arg(script)
        .arg(&file)
        .output()
        .unwrap();
    let (out, err) = (
        String::from_utf8_lossy(&said.stdout),
        String::from_utf8_lossy(&said.stderr),
    );
    // Straight to the terminal: the greatest differences belong into the record of a run.
    writeln!(std::io::stderr(), "{out}").unwrap();
    assert!(said.status.success(), "{out}\n{err}");
}
