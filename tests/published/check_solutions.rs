//! Source: `orp_solutions.csv`: Nordstrom, Geochim. Cosmochim. Acta 41 (1977) 1835; Standard Methods 2580:I; ASTM D1498; each row says
//! which, and whether it was seen.

use super::{Row, assert_close, celsius, rows};
use halfcell::electrode::convert::Converted;
use halfcell::electrode::orp::{
    CheckSolution, ReferenceElectrode, check_solution_at, check_solution_vs_she, eh, reference_at,
    rh,
};

const COLUMNS: [(&str, ReferenceElectrode); 5] = [
    ("mv_vs_ag_agcl_kcl_sat", ReferenceElectrode::AgClSaturated),
    ("mv_vs_ag_agcl_kcl_3.5m", ReferenceElectrode::AgCl3_5M),
    ("mv_vs_ag_agcl_kcl_3m", ReferenceElectrode::AgCl3M),
    ("mv_vs_ag_agcl_kcl_1m", ReferenceElectrode::AgCl1M),
    (
        "mv_vs_calomel_kcl_sat",
        ReferenceElectrode::CalomelSaturated,
    ),
];

fn of(solution: &str, set: &str, count: usize) -> Vec<Row> {
    let found: Vec<Row> = rows(include_str!("orp_solutions.csv"), 65)
        .into_iter()
        .filter(|row| row.text("solution") == solution && row.text("set") == set)
        .collect();
    assert_eq!(found.len(), count, "{set} rows of {solution}");
    found
}

/// Holds a row's potential against SHE and against every reference electrode it prints.
fn check(solution: CheckSolution, row: &Row, she_mv: f64, reference_mv: f64) {
    let temp_c = row.figure("temp_c");
    let what = format!("{solution} at {temp_c} °C");
    let got = check_solution_vs_she(solution, celsius(temp_c)).unwrap();
    assert_close(&what, got.value, row.figure("mv_vs_she"), she_mv);
    for (column, reference) in COLUMNS {
        if let Some(mv) = row.maybe(column) {
            let got = check_solution_at(solution, reference, celsius(temp_c)).unwrap();
            assert_close(
                &format!("{what} against {reference}"),
                got.value,
                mv,
                reference_mv,
            );
        }
    }
}

#[test]
fn zobell_is_nordstrom_s_at_every_row() {
    for row in of("zobell", "primary", 18) {
        // Half of the last printed digit; against a reference 0.2 mV more, since the table goes straight between rows and we do not.
        check(CheckSolution::Zobell, &row, 0.0051, 0.26);
    }
}

#[test]
fn the_other_zobell_table_is_within_twice_our_u() {
    for row in of("zobell", "alternative", 30) {
        let temp_c = row.figure("temp_c");
        if temp_c >= 8.0 {
            // It is printed in whole millivolts.
            let got = check_solution_vs_she(CheckSolution::Zobell, celsius(temp_c)).unwrap();
            assert_close(
                &format!("{temp_c} °C"),
                got.value,
                row.figure("mv_vs_she"),
                2.0 * got.u + 0.5,
            );
        }
    }
    let u = |c| {
        check_solution_vs_she(CheckSolution::Zobell, celsius(c))
            .unwrap()
            .u
    };
    // Ours: 1.3 mV, and 0.15 mV for each °C from 25 °C, either side.
    assert_close("u at 25 °C", u(25.0), 1.3, 1e-12);
    assert_close("u at 10 °C", u(10.0), 3.55, 1e-12);
    assert_close("u at 35 °C", u(35.0), 2.8, 1e-12);
}

#[test]
fn light_s_solution_is_675_mv_near_25_degrees_only() {
    check(
        CheckSolution::Light,
        &of("light", "primary", 1)[0],
        1e-9,
        0.051,
    );
    check(
        CheckSolution::Light,
        &of("light", "alternative", 1)[0],
        1e-9,
        1.01,
    );
    for (c, inside) in [(22.9, false), (23.0, true), (27.0, true), (27.1, false)] {
        assert_eq!(
            check_solution_vs_she(CheckSolution::Light, celsius(c)).is_ok(),
            inside,
            "{c} °C"
        );
    }
    // Source: Standard Methods 2580 (found): 475 mV against Ag/AgCl 4 mol/L.
    let four = check_solution_at(
        CheckSolution::Light,
        ReferenceElectrode::AgCl4M,
        celsius(25.0),
    )
    .unwrap();
    assert_close("Light against 4 M", four.value, 475.0, 1e-9);
    assert_close("its u", four.u, 3.0_f64.hypot(1.0_f64.hypot(2.0)), 1e-9);
}

#[test]
fn quinhydrone_is_that_of_d1498() {
    for row in of("quinhydrone_ph4", "primary", 3) {
        check(CheckSolution::Quinhydrone4, &row, 0.5, 2.5);
    }
    for row in of("quinhydrone_ph4", "alternative", 3) {
        check(CheckSolution::Quinhydrone4, &row, 0.12, 0.12);
    }
    for row in of("quinhydrone_ph7", "primary", 3) {
        check(CheckSolution::Quinhydrone7, &row, 1e-9, 2.5);
    }
    for row in of("quinhydrone_ph7", "alternative", 3) {
        check(CheckSolution::Quinhydrone7, &row, 0.5, 0.6);
    }
    // Phosphate of 6.865 is another solution: 8 mV higher at 25 °C, more than our u of 3 mV.
    for row in of("quinhydrone_ph6.86", "primary", 3) {
        let got = check_solution_vs_she(CheckSolution::Quinhydrone7, celsius(row.figure("temp_c")))
            .unwrap();
        assert_close(
            "phosphate instead of a 7.00 bottle",
            row.figure("mv_vs_she") - got.value,
            8.0,
            0.4,
        );
    }
    let u = |s| check_solution_vs_she(s, celsius(25.0)).unwrap().u;
    assert_close("u, pH 4", u(CheckSolution::Quinhydrone4), 2.0, 1e-12);
    assert_close("u, pH 7", u(CheckSolution::Quinhydrone7), 3.0, 1e-12);
}

#[test]
fn coefficients_are_the_slopes_of_the_values() {
    for (solution, c) in [
        (CheckSolution::Zobell, 14.0),
        (CheckSolution::Zobell, 60.0),
        (CheckSolution::Light, 25.0),
        (CheckSolution::Quinhydrone4, 31.0),
        (CheckSolution::Quinhydrone7, 22.0),
    ] {
        let at = |c| check_solution_at(solution, ReferenceElectrode::AgCl3_5M, celsius(c)).unwrap();
        let h = 1e-4;
        assert_close(
            solution.name(),
            at(c).per_c,
            (at(c + h).value - at(c - h).value) / (2.0 * h),
            1e-5,
        );
    }
}

#[test]
fn solutions_have_values_only_where_their_sources_do() {
    for (solution, lowest, highest) in [
        (CheckSolution::Zobell, 8.0, 85.0),
        (CheckSolution::Quinhydrone4, 10.0, 40.0),
        (CheckSolution::Quinhydrone7, 20.0, 30.0),
    ] {
        for (c, inside) in [
            (lowest, true),
            (highest, true),
            (lowest - 0.1, false),
            (highest + 0.1, false),
        ] {
            assert_eq!(
                check_solution_vs_she(solution, celsius(c)).is_ok(),
                inside,
                "{solution} at {c} °C"
            );
        }
    }
    // The reference's table counts too.
    assert!(
        check_solution_at(
            CheckSolution::Zobell,
            ReferenceElectrode::CalomelSaturated,
            celsius(45.0)
        )
        .is_err()
    );
}

#[test]
fn eh_is_the_reading_plus_the_reference() {
    // Source: ORP practice sheet, section 1 (computed): 750 mV against Ag/AgCl 3.5 mol/L is 955 mV SHE at 25 °C.
    let orp = Converted {
        value: 750.0,
        u: 8.0,
    };
    let got = eh(orp, ReferenceElectrode::AgCl3_5M, celsius(25.0), 1.0).unwrap();
    assert_close("Eh", got.value, 955.0, 1e-9);
    // √(8² + (2·1)² + (2·0.7·1)²): u of the reference 1 mV, its slope there −0.7 mV/°C.
    let slope = reference_at(ReferenceElectrode::AgCl3_5M, celsius(25.0))
        .unwrap()
        .per_c;
    assert_close("slope", slope, -0.7, 1e-9);
    assert_close("u", got.u, (64.0_f64 + 4.0 + 1.96).sqrt(), 1e-9);
    assert!(eh(orp, ReferenceElectrode::CalomelSaturated, celsius(5.0), 1.0).is_err());
}

#[test]
fn rh_of_oxygen_saturated_water_is_41_55_at_any_ph() {
    // Source: ORP practice sheet, section 5 (computed from 1229 mV): 41.55 at 25 °C under oxygen of 1 atm; 0 under hydrogen.
    let k = 59.159_35;
    for ph in [0.0, 7.0, 12.0] {
        let oxygen = rh(
            Converted { value: ph, u: 0.1 },
            Converted {
                value: 1229.0 - k * ph,
                u: 10.0,
            },
            celsius(25.0),
        );
        assert_close("rH", oxygen.value, 41.55, 0.005);
        // 0.1 pH is 0.2 rH, 10 mV is 0.34 rH.
        assert_close("u", oxygen.u, 0.2_f64.hypot(0.338), 0.0005);
        let hydrogen = rh(
            Converted { value: ph, u: 0.1 },
            Converted {
                value: -k * ph,
                u: 10.0,
            },
            celsius(25.0),
        );
        assert_close("rH", hydrogen.value, 0.0, 1e-5);
    }
}
