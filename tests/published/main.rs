//! The record of why the figures are right: one module per source, each check naming source, table and row.
//!
//! Figures marked "memory" are those of the publication as remembered, not seen in print for this project; "found" ones were seen.
//! The tables beside these files were put together for this project and carry the provenance of each row.

#![expect(
    clippy::unwrap_used,
    clippy::panic,
    reason = "helpers of tests stop a test as tests do"
)]

mod buffers;
mod calibration;
mod check_solutions;
mod monte_carlo;
mod platinum;
mod reference_electrodes;
mod slope;
mod thermistors;
mod titration;

use halfcell::electrode::units::Celsius;
use std::collections::HashMap;

/// The absolute difference, held against a tolerance with a reason; both figures are shown when it fails.
fn assert_close(what: &str, got: f64, want: f64, tolerance: f64) {
    assert!(
        (got - want).abs() <= tolerance,
        "{what}: got {got}, want {want} ± {tolerance}"
    );
}

/// A row of a table by column.
struct Row(HashMap<String, String>);

impl Row {
    fn text(&self, column: &str) -> &str {
        self.0
            .get(column)
            .unwrap_or_else(|| panic!("no column `{column}`"))
    }

    fn figure(&self, column: &str) -> f64 {
        self.maybe(column)
            .unwrap_or_else(|| panic!("no figure in `{column}`"))
    }

    /// `None` where the table is empty.
    fn maybe(&self, column: &str) -> Option<f64> {
        let text = self.text(column);
        (!text.is_empty()).then(|| text.parse().unwrap())
    }
}

/// Every row of a table; a count keeps a lost row from passing unseen.
fn rows(table: &str, count: usize) -> Vec<Row> {
    let rows: Vec<Row> = csv::Reader::from_reader(table.as_bytes())
        .deserialize()
        .map(|row| Row(row.unwrap()))
        .collect();
    assert_eq!(rows.len(), count, "rows of the table");
    rows
}

fn celsius(c: f64) -> Celsius {
    Celsius::new(c).unwrap()
}
