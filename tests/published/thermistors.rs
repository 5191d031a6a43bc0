//! Source: `thermistors.csv`, computed from the two equations; Steinhart & Hart, Deep-Sea Research 15 (1968) 497 (found through an open project).

use super::{assert_close, celsius, rows};
use halfcell::electrode::temperature::{NoTemperature, Thermistor};
use halfcell::electrode::units::Ohms;

fn ohms(r: f64) -> Ohms {
    Ohms::new(r).unwrap()
}

fn beta(r25: f64, b_k: f64) -> Thermistor {
    Thermistor::Beta {
        r25: ohms(r25),
        b_k,
    }
}

const STEINHART_HART: Thermistor = Thermistor::SteinhartHart {
    a: 1.129_148e-3,
    b: 2.341_25e-4,
    c: 8.767_41e-8,
};

#[test]
fn every_part_both_ways_at_every_row() {
    let parts = [
        ("beta_10k_3950", beta(10_000.0, 3950.0), 0.0051),
        ("beta_10k_3435", beta(10_000.0, 3435.0), 0.0051),
        ("beta_10k_3977", beta(10_000.0, 3977.0), 0.0051),
        ("beta_30k_3950", beta(30_000.0, 3950.0), 0.051),
        ("steinhart_hart", STEINHART_HART, 0.0051),
    ];
    for row in rows(include_str!("thermistors.csv"), 11) {
        let temp_c = row.figure("temp_c");
        for (column, part, half_digit) in &parts {
            let ohm = row.figure(column);
            let what = format!("{column} at {temp_c} °C");
            assert_close(
                &what,
                part.resistance(celsius(temp_c)).unwrap().ohm(),
                ohm,
                *half_digit,
            );
            assert_close(
                &what,
                part.temperature(ohms(ohm)).unwrap().c(),
                temp_c,
                0.001,
            );
        }
    }
}

#[test]
fn the_inverse_vectors_are_met() {
    // Source: temperature sensor sheet, section 2 (computed): 20 000 Ω and 5 000 Ω, four decimals.
    for (part, at_20k, at_5k) in [
        (beta(10_000.0, 3950.0), 10.1765, 41.4602),
        (beta(10_000.0, 3435.0), 8.0802, 44.0861),
        (STEINHART_HART, 9.8986, 41.5721),
    ] {
        assert_close(
            "20 kΩ",
            part.temperature(ohms(20_000.0)).unwrap().c(),
            at_20k,
            0.6e-4,
        );
        assert_close(
            "5 kΩ",
            part.temperature(ohms(5_000.0)).unwrap().c(),
            at_5k,
            0.6e-4,
        );
    }
}

#[test]
fn an_open_or_shorted_thermistor_has_no_temperature() {
    let part = beta(10_000.0, 3950.0);
    for (ohm, open) in [(0.0, false), (50.0, false), (1.0e7, true), (1.0e15, true)] {
        let unit = "Ω";
        let want = if open {
            NoTemperature::Open { figure: ohm, unit }
        } else {
            NoTemperature::Short { figure: ohm, unit }
        };
        assert_eq!(part.temperature(ohms(ohm)), Err(want), "{ohm} Ω");
    }
    // Between the limits there is one: −50 °C is 0.86 MΩ and 200 °C is 74 Ω by the equation.
    assert_close(
        "0.85 MΩ",
        part.temperature(ohms(850_000.0)).unwrap().c(),
        -49.9,
        0.2,
    );
    assert_close(
        "75 Ω",
        part.temperature(ohms(75.0)).unwrap().c(),
        199.3,
        1.0,
    );
}
