//! Calibrating and verifying from figures: numbers, verdicts, refusals.

use crate::harness::Site;
use halfcell::electrode::history::{ProbeId, Verdict};
use serde_json::{Value, json};

/// Theoretical slope at 25 °C, mV/pH: ln(10)·R·T/F with the exact constants (CODATA 2018), computed apart from the program.
const K_25C: f64 = 59.159_2;

/// mV that a probe of this offset and slope gives in a bare pH at 25 °C.
fn mv(offset: f64, slope: f64, ph: f64) -> f64 {
    offset + slope * K_25C * (7.0 - ph)
}

fn close(what: &str, got: &Value, wanted: f64, within: f64) {
    let got = got.as_f64().unwrap_or_else(|| panic!("{what} is {got}"));
    assert!(
        (got - wanted).abs() <= within,
        "{what}: {got}, wanted {wanted} ± {within}"
    );
}

fn keys(object: &Value) -> Vec<&str> {
    let mut keys: Vec<&str> = object
        .as_object()
        .unwrap()
        .keys()
        .map(String::as_str)
        .collect();
    keys.sort_unstable();
    keys
}

const KEYS: [&str; 10] = [
    "as_found_error",
    "calibration",
    "offset_mv",
    "probe",
    "reasons",
    "residuals_mv",
    "slope",
    "u_offset_mv",
    "u_slope",
    "verdict",
];

#[test]
fn two_bare_buffers_give_back_the_offset_and_slope_they_were_made_with() {
    let site = Site::with_probe();
    let line = format!(
        "calibrate --probe P-1042 --at '2026-03-02 09:14' --by 'M. Oake' --json --buffer 4,{:.3},25 --buffer 10,{:.3},25",
        mv(-5.0, 0.98, 4.0),
        mv(-5.0, 0.98, 10.0)
    );
    let said = site.done(&line).json();
    assert_eq!(keys(&said), KEYS);
    close("slope", &said["slope"], 0.98, 1e-5);
    close("offset", &said["offset_mv"], -5.0, 2e-3);
    assert_eq!(said["verdict"], "accepted");
    assert_eq!(said["calibration"], 3);
    assert_eq!(said["probe"], "P-1042");
    assert_eq!(said["as_found_error"], Value::Null);
    assert_eq!(said["reasons"], json!([]));
    // Both buffers ±0.02 pH and ±0.2 mV at k = 1, 6 pH apart: u(slope) = 2·√2·hypot(0.98·0.02, 0.2/59.16)/6 = 0.0094, temperature little.
    close("u_slope", &said["u_slope"], 0.0094, 0.0005);
    let book = site.book();
    let kept = &book.probe(&ProbeId::from("P-1042")).unwrap().calibrations[0];
    assert_eq!(kept.by, "M. Oake");
    assert_eq!(kept.at.ms(), 1_772_457_240_000);
    assert_eq!(kept.fact.verdict, Verdict::Accepted);
}

#[test]
fn what_the_technician_reads_after_a_calibration() {
    let site = Site::with_probe();
    site.done("lot add --kind phthalate --number L123 --value 4.005@25 --u 0.005");
    site.done(
        "calibrate --probe P-1042 --at '2026-03-01 10:00' --buffer 7,0,25 --buffer 4,177.48,25",
    );
    let said = site.done("calibrate --probe P-1042 --at '2026-03-02 09:14' --by 'M. Oake' --buffer phthalate,171.0,25,L123 --buffer phosphate,5.0,25");
    // The moment of entry is the present one.
    let text = said
        .stdout
        .lines()
        .map(|line| line.split(", backdated").next().unwrap())
        .collect::<Vec<_>>()
        .join("\n");
    assert_eq!(
        text,
        "\
calibration 5 of `P-1042` accepted
  event 5, 2026-03-02 09:14, by M. Oake

  as found  +0.105 pH at most, by calibration 4 of 2026-03-01 10:00
  slope     98.1 ± 0.4 % (58.04 ± 0.26 mV/pH at 25 °C)
  offset    -2.8 ± 0.5 mV
  change    slope -1.9 %, offset -2.8 mV

BUFFER                             VALUE        MV     TEMP  RESIDUAL       IN PH
phthalate (lot L123)    4.005 ± 0.005 pH  171.0 mV  25.0 °C  +0.00 mV  +0.0000 pH
phosphate             6.8650 ± 0.0030 pH    5.0 mV  25.0 °C  +0.00 mV  +0.0000 pH"
    );
}

#[test]
fn one_buffer_moves_the_offset_and_keeps_the_slope() {
    let site = Site::with_probe();
    site.done(
        "calibrate --probe P-1042 --at '2026-03-01 10:00' --buffer 4,170,25 --buffer 10,-170,25",
    );
    let said = site
        .done("calibrate --probe P-1042 --at '2026-03-02 10:00' --buffer 7,4,25 --json")
        .json();
    close("slope", &said["slope"], 340.0 / (6.0 * K_25C), 1e-5);
    close("offset", &said["offset_mv"], 4.0, 1e-9);
    // 4 mV at 95.8 % of 59.16 mV/pH read too low: the higher the mV the lower the pH.
    close(
        "as found",
        &said["as_found_error"],
        -4.0 / (340.0 / 6.0),
        1e-4,
    );
}

#[test]
fn a_worn_electrode_is_rejected_with_1_recorded_and_the_calibration_before_stays() {
    let site = Site::with_probe();
    site.done(
        "calibrate --probe P-1042 --at '2026-03-01 10:00' --buffer 4,170,25 --buffer 10,-170,25",
    );
    let line = format!(
        "calibrate --probe P-1042 --at '2026-03-02 09:14' --by 'M. Oake' --buffer 4,{:.2},25 --buffer 10,{:.2},25",
        mv(0.0, 0.80, 4.0),
        mv(0.0, 0.80, 10.0)
    );
    let said = site.run(&line);
    assert_eq!(said.code, 1, "{said:?}");
    assert_eq!(
        said.stderr,
        "error: calibration 4 of `P-1042` rejected: slope 0.800 is below 0.85: clean the glass, take fresh buffers and calibrate again; if it stays, replace the probe\n  \
         where: 4 and 10, 2026-03-02 09:14, by M. Oake\n  \
         do:    do as said and calibrate again; calibration 3 of 2026-03-01 10:00 stays in force\n"
    );
    let book = site.book();
    let probe = book.probe(&ProbeId::from("P-1042")).unwrap();
    assert_eq!(probe.calibrations[1].fact.verdict, Verdict::Rejected);
    let in_force = probe.calibration_at(probe.calibrations[1].at).unwrap();
    assert_eq!(in_force.id, 3);
    let health = site.done("health --at '2026-03-02 09:20' --json").json();
    assert_eq!(health["probes"][0]["calibration"]["id"], 3);
    assert_ne!(health["probes"][0]["status"], "good");
}

#[test]
fn a_dead_electrode_is_a_finding_and_not_a_typing_error() {
    let site = Site::with_probe();
    let said = site.run("calibrate --probe P-1042 --buffer 4,12.0,25 --buffer 10,12.2,25 --json");
    assert_eq!(said.code, 1, "{said:?}");
    let object = said.json();
    assert_eq!(keys(&object), KEYS);
    assert_eq!(object["verdict"], "rejected");
    close("slope", &object["slope"], 0.0, 0.0);
    assert_eq!(
        site.book()
            .probe(&ProbeId::from("P-1042"))
            .unwrap()
            .calibrations
            .len(),
        1
    );
}

#[test]
fn calibrations_that_cannot_be_are_refused_and_nothing_is_written() {
    let site = Site::with_probe();
    site.done("probe add P-2 --kind ph");
    site.done("probe add R-7 --kind orp --reference agcl-3m");
    site.done("probe place R-7 --point BASIN --at '2026-03-01 09:00'");
    site.done("lot add --kind phthalate --number OLD --expires 2026-01-31");
    let kinds = "tetroxalate, tartrate, citrate, phthalate, phosphate, phosphate-1-3.5, borax, carbonate, calcium-hydroxide, zobell, light, quinhydrone-4, quinhydrone-7";
    site.refused(
        "calibrate --probe P-1042 --buffer phtalate,170,25",
        &format!("error: unknown buffer `phtalate`\n  do:    write one of {kinds}, a bare value, or the number of a lot\n"),
    );
    site.refused(
        "calibrate --probe P-1042 --buffer phthalate,170,25,L9",
        "error: unknown lot `L9`\n  do:    name one of OLD, or add it: `halfcell lot add --number L9 --kind …`\n",
    );
    site.refused(
        "calibrate --probe P-1042 --buffer phthalate,170,25,5",
        "error: unknown lot `5`\n  do:    write figures with a decimal point; if `5` is a lot, add it: `halfcell lot add --number 5 --kind …`\n",
    );
    site.refused(
        "calibrate --probe P-1042 --buffer phthalate,170,5,25,0",
        "error: buffer `phthalate,170,5,25,0` has 5 fields, not 3 or 4; figures take a decimal point, the comma stands between fields\n  \
         where: argument `--buffer <KIND_OR_PH,MV,TEMP_C[,LOT]>`\n  \
         do:    write KIND_OR_PH,MV,TEMP_C[,LOT], e.g. `phthalate,177.5,25.0,L123`\n",
    );
    site.refused(
        "calibrate --probe P-1042 --buffer phosphate,0,25,OLD",
        "error: lot `OLD` is phthalate, not phosphate\n  do:    name the bottle the probe was in\n",
    );
    site.refused(
        "calibrate --probe P-1042 --buffer phthalate,170,25,OLD --buffer 7,0,25",
        "error: lot `OLD` (phthalate) expired 2026-02-01 00:00\n  do:    take a fresh bottle; to use it all the same add `--override --why TEXT`\n",
    );
    site.refused(
        "calibrate --probe P-9 --buffer 7,0,25",
        "error: no probe `P-9`\n  do:    name one of P-1042, P-2, R-7, or add it with `halfcell probe add`\n",
    );
    site.refused(
        "calibrate --probe P-2 --buffer 7,0,25",
        "error: probe `P-2` sits nowhere at that time\n  do:    place it first: `halfcell probe place P-2 --point TAG --at T`\n",
    );
    site.refused(
        "calibrate --probe P-1042 --at '2026-02-01 10:00' --buffer 7,0,25",
        "error: probe `P-1042` sits nowhere at that time\n  do:    place it first: `halfcell probe place P-1042 --point TAG --at T`\n",
    );
    site.refused(
        "calibrate --probe P-1042 --buffer 7,0,25 --buffer 7.2,-10,25",
        "error: buffers `7` and `7.2` are 0.20 pH apart, less than 1 pH\n  where: probe `P-1042`\n  do:    take buffers at least 1 pH apart that bracket the liquid, or one of them alone to set the offset\n",
    );
    site.refused(
        "calibrate --probe P-1042 --buffer zobell,220,25",
        "error: `zobell` is an ORP check solution and the probe a pH electrode\n  where: probe `P-1042`\n  do:    name the buffer the probe was in, or its pH\n",
    );
    site.refused(
        "calibrate --probe R-7 --buffer phthalate,170,25",
        "error: `phthalate` is a pH buffer and the probe an ORP electrode\n  where: probe `R-7`\n  do:    name the check solution the probe was in, or its mV against the probe's own reference\n",
    );
    site.refused(
        "calibrate --probe P-1042 --buffer phthalate,170,99",
        "error: `phthalate` has no value at 99 °C: its table goes from 0 °C to 95 °C\n  do:    bring `phthalate` to between 0 °C and 95 °C, or enter its value at 99 °C from the bottle\n",
    );
    site.done("probe retire P-1042");
    site.refused(
        "calibrate --probe P-1042 --buffer 7,0,25",
        "error: probe `P-1042` is retired at that time\n  do:    name an electrode in service; `halfcell probe list` shows them\n",
    );
}

#[test]
fn an_expired_lot_may_be_used_with_a_stated_reason_that_is_kept() {
    let site = Site::with_probe();
    site.done("lot add --kind phthalate --number OLD --expires 2026-01-31");
    let line = "calibrate --probe P-1042 --at '2026-03-02 10:00' --buffer OLD,171,25 --buffer 7,0,25 --override";
    assert_eq!(site.run(line).code, 2, "an override without a reason");
    site.done(&format!("{line} --why 'no other bottle on site'"));
    let book = site.book();
    let kept = &book.probe(&ProbeId::from("P-1042")).unwrap().calibrations[0].fact;
    assert_eq!(
        kept.override_why.as_deref(),
        Some("no other bottle on site")
    );
    assert_eq!(kept.readings[0].name, "phthalate");
    assert_eq!(kept.readings[0].lot.as_deref(), Some("OLD"));
}

#[test]
fn a_calibration_is_struck_out_and_the_one_before_is_in_force_again() {
    let site = Site::with_probe();
    site.done(
        "calibrate --probe P-1042 --at '2026-03-01 10:00' --buffer 4,170,25 --buffer 10,-170,25",
    );
    site.done(
        "calibrate --probe P-1042 --at '2026-03-02 10:00' --buffer 4,175,25 --buffer 10,-165,25",
    );
    let said = site.done("calibrate --reject 4 --why 'bottles mixed up' --by 'M. Oake'");
    assert!(
        said.stdout
            .starts_with("calibration 4 struck out\n  event 5, "),
        "{}",
        said.stdout
    );
    let health = site.done("health --json").json();
    assert_eq!(health["probes"][0]["calibration"]["id"], 3);
    site.refused(
        "calibrate --reject 4 --why again",
        "error: calibration 4 is struck out already\n  where: probe `P-1042`\n  do:    leave it as it is\n",
    );
    site.refused(
        "calibrate --reject 77 --why x",
        "error: no calibration 77\n  do:    name the number of a calibration; `halfcell health` shows the one in force\n",
    );
    assert_eq!(site.run("calibrate --reject 3").code, 2, "without a reason");
}

#[test]
fn an_orp_probe_is_set_by_a_check_solution_or_a_bare_potential() {
    let site = Site::new();
    site.done("probe add R-7 --kind orp --reference agcl-3m");
    site.done("probe place R-7 --point BASIN --at '2026-03-01 09:00'");
    // ZoBell at 25 °C is 430.28 mV against SHE (Nordstrom 1977, formula from memory), against Ag/AgCl 3 mol/L about 221 mV.
    let said = site
        .done("calibrate --probe R-7 --at '2026-03-02 10:00' --buffer zobell,225.0,25 --json")
        .json();
    close("offset", &said["offset_mv"], 4.0, 2.5);
    close("slope", &said["slope"], 1.0, 0.0);
    let said = site
        .done("calibrate --probe R-7 --at '2026-03-03 10:00' --buffer 220,223.0,25 --json")
        .json();
    close("offset", &said["offset_mv"], 3.0, 1e-9);
    assert_eq!(said["verdict"], "accepted");
}

#[test]
fn a_verification_within_tolerance_passes_and_one_beyond_it_ends_with_1() {
    let site = Site::with_probe();
    site.done("calibrate --probe P-1042 --at '2026-03-01 10:00' --buffer 4,177.4776,25 --buffer 10,-177.4776,25");
    let passed = site.done("verify --probe P-1042 --at '2026-03-02 09:14' --by 'M. Oake' --stage as-found --buffer 7,-3,25 --json");
    let said = passed.json();
    assert_eq!(keys(&said), KEYS);
    assert_eq!(said["verdict"], "passed");
    assert_eq!(said["calibration"], 3);
    close("error", &said["as_found_error"], 3.0 / K_25C, 1e-4);
    close("residual", &said["residuals_mv"][0], -3.0, 1e-3);
    let failed = site.run("verify --probe P-1042 --at '2026-03-02 09:20' --by 'M. Oake' --buffer 7,12,25 --buffer 4,177.5,25");
    assert_eq!(failed.code, 1, "{failed:?}");
    assert_eq!(
        failed.stderr,
        "error: verification of `P-1042` failed: error -0.203 pH in 7 is beyond the tolerance of 0.10 pH\n  \
         where: 2026-03-02 09:20, by M. Oake\n  \
         do:    clean the electrode, take fresh buffer and verify again; if it stays, calibrate\n"
    );
    let text = failed
        .stdout
        .lines()
        .map(|line| line.split(", backdated").next().unwrap())
        .collect::<Vec<_>>()
        .join("\n");
    assert_eq!(
        text,
        "\
verification of `P-1042` (check) failed: tolerance 0.10 pH
  event 5, 2026-03-02 09:20, by M. Oake
  against calibration 3 of 2026-03-01 10:00

BUFFER           VALUE        MV     TEMP      ERROR
7       7.00 ± 0.04 pH   12.0 mV  25.0 °C  -0.203 pH
4       4.00 ± 0.04 pH  177.5 mV  25.0 °C  +0.000 pH"
    );
}

#[test]
fn an_expired_lot_verifies_nothing() {
    let site = Site::with_probe();
    site.done("lot add --kind phthalate --number OLD --expires 2026-01-31");
    site.done(
        "calibrate --probe P-1042 --at '2026-03-01 10:00' --buffer 4,177.5,25 --buffer 7,0,25",
    );
    site.refused(
        "verify --probe P-1042 --at '2026-03-02 10:00' --buffer phthalate,177,25,OLD",
        "error: lot `OLD` (phthalate) expired 2026-02-01 00:00\n  do:    take a fresh bottle\n",
    );
}

#[test]
fn a_verification_without_a_calibration_in_force_is_refused() {
    let site = Site::with_probe();
    site.refused(
        "verify --probe P-1042 --buffer 7,0,25",
        "error: probe `P-1042` has no accepted calibration at that time\n  do:    calibrate it first; a verification is held against the calibration in force\n",
    );
}
