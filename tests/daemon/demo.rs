//! The demo: nothing typed but its name.

use crate::harness::{HALFCELL, PATIENCE, ok, taken_up_after_ms, until};
use std::process::{Command, Stdio};

#[test]
fn the_demo_shows_values_of_six_points_and_leaves_a_sound_ledger() {
    let folder = tempfile::tempdir().unwrap();
    let place = folder.path().join("demo");
    let demo = Command::new(HALFCELL)
        .args(["demo", "--days", "8", "--seconds", "12", "--folder"])
        .arg(&place)
        .stderr(Stdio::piped())
        .stdout(Stdio::piped())
        .spawn()
        .unwrap();
    let config = place.join("halfcell.toml");
    let says = |words: &[&str]| {
        Command::new(HALFCELL)
            .args(words)
            .env("HALFCELL_CONFIG", &config)
            .output()
            .unwrap()
    };

    // Beside the running demo: a calibration from figures, and the status that uses it.
    let status =
        || serde_json::from_slice::<serde_json::Value>(&says(&["status", "--json"]).stdout).ok();
    let pond = |status: &serde_json::Value| status["points"][0].clone();
    let live = |status: &serde_json::Value| {
        pond(status)["stale"] == false && pond(status)["value"].is_number()
    };
    let (before, _) = until("live values", PATIENCE, || status().filter(live));
    ok(&says(&[
        "calibrate",
        "--probe",
        "P-2101",
        "--by",
        "M. Oake",
        "--buffer",
        "phthalate,172.0,20.0",
        "--buffer",
        "phosphate,4.0,20.0",
    ]));
    let changed =
        |status: &serde_json::Value| pond(status)["calibration"] != pond(&before)["calibration"];
    until("the new calibration in the status", PATIENCE, || {
        status().filter(changed)
    });

    let ended = demo.wait_with_output().unwrap();
    ok(&ended);
    let shown = String::from_utf8_lossy(&ended.stdout).into_owned();
    for tag in [
        "POND-1",
        "POND-2",
        "RACEWAY-1A",
        "RACEWAY-1B",
        "NEUTRAL-1",
        "DISINFECT-1",
    ] {
        assert!(shown.contains(tag), "{tag} is not in:\n{shown}");
    }
    for words in [
        "8 days of history, 69120 readings",
        "failure: temperature missing or impossible",
        "slope 0.8",
        "ledger and configuration stay in",
    ] {
        assert!(shown.contains(words), "`{words}` is not in:\n{shown}");
    }
    ok(&says(&["audit"]));
    let taken_up = taken_up_after_ms(&place.join("sable-creek.db"), "POND-1").unwrap();
    // At most 2 s on a machine of its own; here a dozen other tests share two cores.
    println!("taken up after {taken_up} ms");
    assert!(taken_up <= 5_000, "after {taken_up} ms");
}
