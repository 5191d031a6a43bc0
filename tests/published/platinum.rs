//! Source: `pt_table.csv`: IEC 60751:2008 (ITS-90), Callendar–Van Dusen equation; coefficients seen in an open engineering library whose
//! resistances agree to the last digit.

use super::{assert_close, celsius, rows};
use halfcell::electrode::temperature::{NoTemperature, PT100, PT1000};
use halfcell::electrode::units::Ohms;

fn ohms(r: f64) -> Ohms {
    Ohms::new(r).unwrap()
}

#[test]
fn both_sensors_both_ways_at_every_row() {
    for row in rows(include_str!("pt_table.csv"), 51) {
        let temp_c = row.figure("temp_c");
        let what = format!("{temp_c} °C");
        let (r100, r1000) = (row.figure("pt100_ohm"), row.figure("pt1000_ohm"));
        assert_close(
            &what,
            PT100.resistance(celsius(temp_c)).ohm(),
            r100,
            0.5001e-4,
        );
        assert_close(
            &what,
            PT1000.resistance(celsius(temp_c)).ohm(),
            r1000,
            0.5001e-3,
        );
        // Half of the last digit of 4 decimals is 0.00014 °C.
        assert_close(
            &what,
            PT100.temperature(ohms(r100)).unwrap().c(),
            temp_c,
            0.0002,
        );
        assert_close(
            &what,
            PT1000.temperature(ohms(r1000)).unwrap().c(),
            temp_c,
            0.0002,
        );
        let h = 1e-3;
        let slope = (PT100.resistance(celsius(temp_c + h)).ohm()
            - PT100.resistance(celsius(temp_c - h)).ohm())
            / (2.0 * h);
        assert_close(&what, slope, row.figure("pt100_ohm_per_k"), 0.6e-5);
    }
}

#[test]
fn the_printed_table_is_met() {
    // Source: IEC 60751:2008, table of Pt100 resistances, two decimals (memory).
    for (temp_c, ohm) in [
        (-50.0, 80.31),
        (-20.0, 92.16),
        (0.0, 100.00),
        (10.0, 103.90),
        (20.0, 107.79),
        (25.0, 109.73),
        (37.0, 114.38),
        (50.0, 119.40),
        (100.0, 138.51),
        (150.0, 157.33),
        (200.0, 175.86),
    ] {
        assert_close(
            &format!("{temp_c} °C"),
            PT100.resistance(celsius(temp_c)).ohm(),
            ohm,
            0.0051,
        );
    }
}

#[test]
fn there_and_back_is_the_same_temperature() {
    for tenth in -990..2600 {
        let temp_c = f64::from(tenth) / 10.0;
        let back = PT1000
            .temperature(PT1000.resistance(celsius(temp_c)))
            .unwrap()
            .c();
        assert_close(&format!("{temp_c} °C"), back, temp_c, 1e-9);
    }
}

#[test]
fn an_open_or_shorted_sensor_has_no_temperature() {
    // Limits ours: 0.6·R0 (−100 °C) and 2·R0 (266 °C).
    assert_eq!(
        PT100.temperature(ohms(59.9)),
        Err(NoTemperature::Short {
            figure: 59.9,
            unit: "Ω"
        })
    );
    assert_eq!(
        PT100.temperature(ohms(200.1)),
        Err(NoTemperature::Open {
            figure: 200.1,
            unit: "Ω"
        })
    );
    assert_close(
        "at the short limit",
        PT100.temperature(ohms(60.1)).unwrap().c(),
        -100.0,
        1.0,
    );
    assert_close(
        "at the open limit",
        PT1000.temperature(ohms(1999.0)).unwrap().c(),
        266.0,
        1.0,
    );
    // The limits themselves are still temperatures.
    assert!(PT100.temperature(ohms(60.0)).is_ok() && PT100.temperature(ohms(200.0)).is_ok());
    // A Pt1000 on an input set to Pt100 and the reverse never give a temperature.
    assert!(PT100.temperature(ohms(1097.0)).is_err() && PT1000.temperature(ohms(109.7)).is_err());
}
