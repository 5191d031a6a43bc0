//! `status` and `health`: the contract's shapes, and a stale value is never shown as live.

use crate::harness::Site;
use serde_json::{Value, json};

/// A calibrated pond and basin with readings at 09:14:00 and 09:14:01 on 2026-03-02 in Halifax.
fn watched() -> Site {
    let site = Site::with_probe();
    site.done("probe add R-7 --kind orp --reference agcl-3m --at '2026-03-01 08:00'");
    site.done("probe place R-7 --point BASIN --at '2026-03-01 09:00'");
    site.done("calibrate --probe P-1042 --at '2026-03-01 10:00' --buffer 4,177.4776,25 --buffer 10,-177.4776,25");
    site.done("calibrate --probe R-7 --at '2026-03-01 10:00' --buffer 220,220,25");
    let rows = "time,point,mv,temp_c\n\
        2026-03-02T13:14:00Z,POND-3,-177.48,25.0\n\
        2026-03-02T13:14:01Z,POND-3,0,25.0\n\
        2026-03-02T13:14:01Z,BASIN,650,20.0\n\
        2026-03-02T13:14:01Z,POND-4,10,\n";
    std::fs::write(site.path("rows.csv"), rows).unwrap();
    site.done("import rows.csv");
    site
}

#[test]
fn status_json_is_the_contracts_object() {
    let site = watched();
    let said = site.done("status --at '2026-03-02 09:14:02' --json").json();
    assert_eq!(said["site"], "Sable Creek Hatchery");
    assert_eq!(said["time"], "2026-03-02T13:14:02.000Z");
    let points = said["points"].as_array().unwrap();
    assert_eq!(points.len(), 3);
    let mut pond = points[0].clone();
    let u = pond["u"].take().as_f64().unwrap();
    assert!(u > 0.02 && u < 0.1, "{u}");
    let by = pond["calibrate_by"].take();
    assert!(
        by.as_str()
            .is_some_and(|by| by > "2026-03-02T13:14:02.000Z"),
        "{by}"
    );
    assert_eq!(
        pond,
        json!({
            "tag": "POND-3", "quantity": "ph", "time": "2026-03-02T13:14:01.000Z", "mv": 0.0, "temp_c": 25.0,
            "value": 7.0, "u": null, "unit": "pH", "flag": 1, "stale": false, "probe": "P-1042", "calibration": 5,
            "probe_status": "good", "calibrate_by": null, "alarm": null
        })
    );
    let orphan = &points[1];
    assert_eq!(orphan["tag"], "POND-4");
    assert_eq!(
        (&orphan["value"], &orphan["probe"], &orphan["probe_status"]),
        (&Value::Null, &Value::Null, &Value::Null)
    );
    assert_eq!(orphan["mv"], 10.0);
    let basin = &points[2];
    assert_eq!(
        (&basin["unit"], &basin["value"]),
        (&json!("mV"), &json!(650.0))
    );
    // Ag/AgCl in 3 mol/L at 20 °C is about 213 mV against SHE (reference sheet, from memory).
    let eh = basin["eh"].as_f64().unwrap();
    assert!((eh - 863.0).abs() < 3.0, "{eh}");
    assert!(pond.get("eh").is_none());
}

#[test]
fn status_at_an_earlier_time_knows_only_what_was_there_then() {
    let site = watched();
    let said = site.done("status --at 2026-03-02T13:14:00Z --json").json();
    let pond = &said["points"][0];
    // −177.48 mV at 25 °C with offset 0 and slope 1 is pH 10.000.
    assert!(
        (pond["value"].as_f64().unwrap() - 10.0).abs() < 5e-4,
        "{pond}"
    );
    let before = site.done("status --at 2026-03-02T13:13:59Z --json").json();
    assert_eq!(before["points"][0]["value"], Value::Null);
    assert_eq!(before["points"][0]["time"], Value::Null);
    assert_eq!(before["points"][0]["probe"], "P-1042");
}

#[test]
fn the_table_shows_value_and_u_and_calls_an_old_value_stale() {
    let site = watched();
    let fresh = site.done("status --at '2026-03-02 09:14:03'");
    assert_eq!(
        fresh.stdout,
        "\
Sable Creek Hatchery, 2026-03-02 09:14 AST

POINT   VALUE                         TEMP     AGE  BAND           FLAG                   PROBE     STATUS  CALIBRATE BY
POND-3  7.00 ± 0.05 pH                25.0 °C  2 s  6.8 to 8.6 pH  pass                   P-1042    good    2026-03-11
POND-4  no value                      20.0 °C  2 s  -              fail (no-calibration)  no probe  -       -
BASIN   650 ± 11 mV (Eh 863 ± 12 mV)  20.0 °C  2 s  -              pass                   R-7       good    2026-03-11
"
    );
    let stale = site.done("status --at '2026-03-02 09:15:02'");
    let line = stale
        .stdout
        .lines()
        .find(|line| line.starts_with("POND-3 "))
        .unwrap();
    assert!(line.contains("stale: 7.00 ± 0.05 pH "), "{line}");
    assert!(line.contains("61 s"), "{line}");
    assert!(line.contains("failure"), "{line}");
    let json = site.done("status --at '2026-03-02 09:15:02' --json").json();
    assert_eq!(json["points"][0]["stale"], true);
    // Every 60 s: three intervals.
    assert_eq!(json["points"][1]["stale"], false);
}

#[test]
fn health_json_is_the_contracts_object() {
    let site = watched();
    let said = site
        .done("health --probe P-1042 --at '2026-03-02 09:14:02' --json")
        .json();
    let mut probe = said["probes"][0].clone();
    // As last accepted beside as now estimated: the same electrode, a day later.
    for key in ["slope", "offset_mv"] {
        let (now, then) = (&probe[key], &probe["calibration"][key]);
        let apart = now.as_f64().unwrap() - then.as_f64().unwrap();
        assert!(apart.abs() < 0.01, "{key}: {now} now, {then} then");
    }
    for key in ["slope", "u_slope", "offset_mv", "u_offset_mv"] {
        assert!(probe[key].take().is_f64(), "{key}");
        assert!(probe["calibration"][key].take().is_f64(), "{key}");
    }
    let per_ph = probe["slope_mv_per_ph_25c"].take().as_f64().unwrap();
    assert!((per_ph - 59.159).abs() < 0.1, "{per_ph}");
    assert!(probe["drift_mv_per_day"].take().is_f64());
    let date = |probe: &mut Value, key: &str| probe[key].take().as_str().unwrap().to_owned();
    let by = date(&mut probe, "calibrate_by");
    let earliest = date(&mut probe, "calibrate_by_earliest");
    let latest = date(&mut probe, "calibrate_by_latest");
    assert!(earliest <= by && by <= latest, "{earliest} {by} {latest}");
    assert_eq!(
        probe,
        json!({
            "probe": "P-1042", "point": "POND-3", "status": "good", "reasons": [],
            "slope": null, "u_slope": null, "offset_mv": null, "u_offset_mv": null, "slope_mv_per_ph_25c": null,
            "drift_mv_per_day": null, "calibrate_by": null, "calibrate_by_earliest": null, "calibrate_by_latest": null,
            "calibrate_by_reason": "uncertainty", "n_events": 1, "causes": [],
            "calibration": {"id": 5, "at": "2026-03-01T14:00:00.000Z", "slope": null, "offset_mv": null, "u_slope": null, "u_offset_mv": null}
        })
    );
    assert_eq!(
        site.done("health --json").json()["probes"]
            .as_array()
            .unwrap()
            .len(),
        2
    );
}

#[test]
fn health_tells_slope_offset_and_age_with_their_limits_and_why_not_good() {
    let site = watched();
    site.run("verify --probe P-1042 --at '2026-03-02 09:00' --buffer 7,30,25");
    let said = site.done("health --probe P-1042 --at '2026-03-02 09:14:02'");
    assert_eq!(
        said.stdout,
        "\
`P-1042` (ph) at `POND-3`: maintenance required
  because       last verification failed: error -0.507 pH in 7 is beyond the tolerance of 0.10 pH
  slope         100.0 ± 1.0 % (59.2 ± 0.6 mV/pH at 25 °C), good within 90 to 103 %
  offset        0.0 ± 1.7 mV, good within ±30 mV
  calibrated    23 h ago, 2026-03-01 10:00 (calibration 5, by oake)
  thought now   slope 100.0 ± 1.0 % (59.1 ± 0.6 mV/pH at 25 °C), offset 0.0 ± 2.4 mV, drifting +0.00 mV a day (from 1 visit)
  calibrate by  2026-03-11 (between 2026-03-09 and 2027-04-07 the error passes the tolerance); its uncertainty reaches the tolerance then
"
    );
}

#[test]
fn a_displaced_electrode_is_not_blamed_for_readings_it_does_not_give() {
    let site = watched();
    site.done("probe add P-2 --kind ph --at '2026-03-02 09:10'");
    site.done("probe place P-2 --point POND-3 --at '2026-03-02 09:10'");
    let said = site
        .done("health --probe P-1042 --at '2026-03-02 09:14:02' --json")
        .json();
    assert_eq!(said["probes"][0]["point"], Value::Null);
    assert_eq!(said["probes"][0]["status"], "good");
}

#[test]
fn a_hold_and_a_failed_verification_show_in_the_status() {
    let site = watched();
    site.run("verify --probe P-1042 --at '2026-03-02 09:00' --buffer 7,30,25");
    let status = |at: &str| {
        site.done(&format!("status --at '{at}' --json")).json()["points"][0]["probe_status"].clone()
    };
    assert_eq!(status("2026-03-02 09:14:02"), "maintenance required");
    site.done("hold --point POND-3 --for 30m --why cleaning --at '2026-03-02 09:14'");
    assert_eq!(status("2026-03-02 09:14:02"), "function check");
}
