//! Un-ionized ammonia, free CO2 and pKw against published tables and independent programs, one module per source.
//!
//! `ammonia.csv` and `co2.csv` were gathered for this project; each row names its source and how its figure was come by.
#![expect(
    clippy::unwrap_used,
    reason = "helpers of tests: what fails there fails the test"
)]

mod ammonia;
mod carbonate;
mod edges;
mod laws;
mod water;

use halfcell::electrode::convert::Converted;
use halfcell::electrode::units::Celsius;
use halfcell::water::Liquid;
use std::collections::BTreeMap;

/// The rows of a table, by column.
fn rows(text: &str) -> Vec<BTreeMap<String, String>> {
    let mut reader = csv::Reader::from_reader(text.as_bytes());
    reader.deserialize().map(Result::unwrap).collect()
}

fn figure(row: &BTreeMap<String, String>, column: &str) -> f64 {
    row[column].parse().unwrap()
}

/// A liquid known exactly.
fn exact(ph: f64, temp_c: f64, salinity_g_kg: f64) -> Liquid {
    Liquid {
        ph: Converted { value: ph, u: 0.0 },
        temp: Celsius::new(temp_c).unwrap(),
        u_temp_c: 0.0,
        salinity_g_kg,
    }
}

#[track_caller]
fn assert_within(what: &str, got: f64, expected: f64, fraction: f64) {
    let off = (got - expected).abs() / expected.abs();
    assert!(
        off <= fraction,
        "{what}: {got} against {expected}, {:.3} % off",
        100.0 * off
    );
}
