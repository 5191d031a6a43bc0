//! The record of why the figures are right: one module per source, each check naming source, table and row.
//!
//! Figures marked "from memory" are those of the publication as remembered, not seen in print for this project.

#![expect(
    clippy::unwrap_used,
    clippy::panic,
    reason = "helpers of tests stop a test as tests do"
)]

mod calibration;

/// The absolute difference, held against a tolerance with a reason; both figures are shown when it fails.
fn assert_close(what: &str, got: f64, want: f64, tolerance: f64) {
    assert!(
        (got - want).abs() <= tolerance,
        "{what}: got {got}, want {want} ± {tolerance}"
    );
}
