//! Source: `reference_electrodes.csv`: Sawyer, Sobkowiak & Roberts (1995); USGS National Field Manual A6.5; ISO 11271:2002; ASTM D1498;
//! Bates (1973); each row says which, and whether it was seen.

use super::{Row, assert_close, celsius, rows};
use halfcell::electrode::orp::{ReferenceElectrode, agcl_standard_potential, reference_at};

fn all() -> Vec<Row> {
    rows(include_str!("reference_electrodes.csv"), 151)
}

fn electrode(row: &Row) -> Option<ReferenceElectrode> {
    let fill = row.text("fill").trim_start_matches("kcl_");
    let metal = match row.text("electrode") {
        "ag_agcl" => "agcl",
        other => other,
    };
    format!("{metal}-{fill}").parse().ok()
}

#[test]
fn every_primary_row_is_carried() {
    let mut n = 0;
    for row in all().iter().filter(|row| row.text("set") == "primary") {
        let temp_c = row.figure("temp_c");
        let electrode = electrode(row).unwrap();
        let got = reference_at(electrode, celsius(temp_c)).unwrap();
        assert_close(
            &format!("{electrode} at {temp_c} °C"),
            got.value,
            row.figure("mv_vs_she"),
            1e-9,
        );
        assert!(
            (1.0..=3.0).contains(&got.u),
            "{electrode} at {temp_c} °C: u {}",
            got.u
        );
        n += 1;
    }
    assert_eq!(n, 66, "primary rows");
}

#[test]
fn every_extension_row_is_carried_with_a_greater_u() {
    let mut n = 0;
    for row in all().iter().filter(|row| row.text("set") == "extension") {
        let temp_c = row.figure("temp_c");
        let electrode = electrode(row).unwrap();
        let got = reference_at(electrode, celsius(temp_c)).unwrap();
        let at_25 = reference_at(electrode, celsius(25.0)).unwrap();
        assert_close(
            &format!("{electrode} at {temp_c} °C"),
            got.value,
            row.figure("mv_vs_she"),
            1e-9,
        );
        // Ours: 2 mV more at 0–10 °C and 40–60 °C, 4 mV more above.
        let more = if temp_c > 60.0 { 4.0 } else { 2.0 };
        assert_close(
            &format!("u of {electrode} at {temp_c} °C"),
            got.u,
            at_25.u + more,
            1e-9,
        );
        n += 1;
    }
    assert_eq!(n, 31, "extension rows");
}

#[test]
fn other_published_values_lie_within_what_the_families_part_by() {
    let mut n = 0;
    for row in all().iter().filter(|row| row.text("set") == "alternative") {
        let temp_c = row.figure("temp_c");
        let electrode = electrode(row).unwrap();
        let got = reference_at(electrode, celsius(temp_c)).unwrap();
        // With and without liquid junction differ by 2 to 3 mV, calomel by 3.4.
        assert_close(
            &format!("{electrode} at {temp_c} °C"),
            got.value,
            row.figure("mv_vs_she"),
            3.5,
        );
        n += 1;
    }
    assert_eq!(n, 34, "alternative rows");
}

#[test]
fn the_standard_potential_of_silver_is_bates_and_bower_s() {
    let mut n = 0;
    for row in all().iter().filter(|row| row.text("set") == "e0") {
        let temp_c = row.figure("temp_c");
        let (e0, per_c) = agcl_standard_potential(celsius(temp_c));
        assert_close(
            &format!("E0({temp_c} °C)"),
            e0,
            row.figure("mv_vs_she"),
            0.0051,
        );
        let h = 1e-4;
        let slope = (agcl_standard_potential(celsius(temp_c + h)).0
            - agcl_standard_potential(celsius(temp_c - h)).0)
            / (2.0 * h);
        assert_close(&format!("dE0/dT({temp_c} °C)"), per_c, slope, 1e-7);
        n += 1;
    }
    assert_eq!(n, 20, "rows of E0");
}

#[test]
fn the_slopes_are_those_of_the_practice_sheet() {
    // Source: ORP practice sheet, section 1 (computed): mV/K over 10–40 °C.
    use ReferenceElectrode::{
        AgCl1M, AgCl3_3M, AgCl3_5M, AgCl3M, AgClSaturated, Calomel0_1M, Calomel1M, Calomel3_5M,
        CalomelSaturated,
    };
    for (electrode, slope) in [
        (AgClSaturated, -1.00),
        (AgCl3_5M, -0.74),
        (AgCl3_3M, -0.74),
        (AgCl3M, -0.73),
        (AgCl1M, -0.58),
        (CalomelSaturated, -0.66),
        (Calomel3_5M, -0.40),
        (Calomel1M, -0.29),
        (Calomel0_1M, -0.08),
    ] {
        let at = |c| reference_at(electrode, celsius(c)).unwrap().value;
        // Rounded rows: ±0.5 mV at each end over 30 °C.
        assert_close(electrode.name(), (at(40.0) - at(10.0)) / 30.0, slope, 0.02);
        let (got, chord) = (
            reference_at(electrode, celsius(25.0)).unwrap().per_c,
            (at(30.0) - at(20.0)) / 10.0,
        );
        assert_close(electrode.name(), got, chord, 0.05);
    }
}

#[test]
fn fillings_without_a_table_move_as_their_neighbours_do() {
    use ReferenceElectrode::{AgCl0_1M, AgCl3_5M, AgCl4M, AgClUnknown};
    for temp_c in [5.0, 25.0, 37.5] {
        let like = reference_at(AgCl3_5M, celsius(temp_c)).unwrap();
        let four = reference_at(AgCl4M, celsius(temp_c)).unwrap();
        assert_close("4 M", four.value, like.value - 5.0, 1e-9);
        assert_close("4 M", four.u, like.u.hypot(2.0), 1e-9);
        let unknown = reference_at(AgClUnknown, celsius(temp_c)).unwrap();
        assert_close("unknown filling", unknown.value, like.value, 1e-9);
        assert_close("unknown filling", unknown.u, like.u.hypot(5.0), 1e-9);
        assert_close("unknown filling", unknown.per_c, like.per_c, 1e-9);
    }
    // 0.1 mol/L: E0 changes by +6.84 mV from 25 °C to 10 °C less... by hand at 40 °C: E0(40) − E0(25) = 212.03 − 222.36 = −10.33 mV;
    // −R/F·ln(a)·15 = 0.0861733·2.56525·15 = +3.316 mV; 289.5 − 10.33 + 3.316 = 282.49 mV.
    let warm = reference_at(AgCl0_1M, celsius(40.0)).unwrap();
    assert_close("0.1 M at 40 °C", warm.value, 282.49, 0.02);
    let h = 1e-4;
    let at = |c| reference_at(AgCl0_1M, celsius(c)).unwrap().value;
    assert_close(
        "0.1 M slope",
        warm.per_c,
        (at(40.0 + h) - at(40.0 - h)) / (2.0 * h),
        1e-6,
    );
    assert_close("0.1 M u", warm.u, 3.0, 1e-12);
}

#[test]
fn outside_its_table_a_reference_has_no_value() {
    for (name, lowest, highest) in [
        ("agcl-0.1m", 0.0, 60.0),
        ("agcl-1m", 0.0, 80.0),
        ("agcl-3m", 0.0, 80.0),
        ("agcl-3.3m", 0.0, 80.0),
        ("agcl-3.5m", 0.0, 80.0),
        ("agcl-4m", 0.0, 80.0),
        ("agcl-unknown", 0.0, 80.0),
        ("agcl-sat", 0.0, 80.0),
        ("calomel-0.1m", 10.0, 40.0),
        ("calomel-1m", 10.0, 40.0),
        ("calomel-3.5m", 10.0, 40.0),
        ("calomel-sat", 10.0, 40.0),
    ] {
        let electrode: ReferenceElectrode = name.parse().unwrap();
        for (c, inside) in [
            (lowest, true),
            (highest, true),
            (lowest - 0.1, false),
            (highest + 0.1, false),
        ] {
            let got = reference_at(electrode, celsius(c));
            assert_eq!(got.is_ok(), inside, "{name} at {c} °C");
            if let Err(error) = got {
                assert_eq!(error.name, name);
                assert!(
                    (error.lowest_c - lowest).abs() < 1e-12
                        && (error.highest_c - highest).abs() < 1e-12
                );
            }
        }
    }
}
