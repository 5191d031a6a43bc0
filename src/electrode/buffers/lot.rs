//! # A bottle's own value: a lot with its certificate

use super::{BufferKind, U_BOTTLE, buffer_at};
use crate::electrode::history::Lot;
use crate::electrode::standard::{OutsideTable, Row, StandardValue, interpolate};
use crate::electrode::units::Celsius;

/// How far from its one certified temperature a value is taken when nothing is known of how it moves, °C (EPA 9040C: buffer and sample
/// within 2 °C, from memory).
const ONE_VALUE_WITHIN_C: f64 = 2.0;

/// Why a lot has no value.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
pub enum LotError {
    /// Not at this temperature.
    #[error(transparent)]
    OutsideTable(#[from] OutsideTable),
    /// Neither a certificate nor a buffer whose table is known.
    #[error("lot `{number}` has no values and `{kind}` is no buffer with a table")]
    NoValues {
        /// The lot.
        number: String,
        /// Its kind as entered.
        kind: String,
    },
    /// Two values at one temperature, or a figure that is none.
    #[error("lot `{number}` has values that cannot stand together at {temp_c} °C")]
    Contradiction {
        /// The lot.
        number: String,
        /// Where.
        temp_c: f64,
    },
}

/// pH of a lot of buffer at temperature `t`.
///
/// - **Several certificate values**: between them, by the curve of the buffer tables; outside them an error.
/// - **One value**: of a standard buffer it moves along the buffer's own table; of any other it holds within 2 °C of its temperature.
/// - **No value**: the table of its kind.
/// - **u**: half the certificate's expanded uncertainty (k = 2), or [`U_BOTTLE`] without one.
///
/// A lot of check solution has values against one reference electrode and is looked up in the same way.
///
/// # Errors
/// [`LotError`] when the lot has no value there.
pub fn lot_at(lot: &Lot, t: Celsius) -> Result<StandardValue, LotError> {
    let u = lot.u.map_or(U_BOTTLE, |expanded| expanded / 2.0);
    let kind = lot.kind.parse::<BufferKind>().ok();
    let mut values = lot.values.clone();
    values.sort_by(|a, b| a[1].total_cmp(&b[1]));
    if let Some(wrong) = values
        .iter()
        .find(|v| !(v[0].is_finite() && v[1].is_finite()))
    {
        return Err(contradiction(lot, wrong[1]));
    }
    if let Some(twice) = values
        .windows(2)
        .find(|pair| pair[1][1] - pair[0][1] <= 0.0)
    {
        return Err(contradiction(lot, twice[0][1]));
    }
    match (&values[..], kind) {
        ([], None) => Err(LotError::NoValues {
            number: lot.number.clone(),
            kind: lot.kind.clone(),
        }),
        ([], Some(kind)) => Ok(StandardValue {
            u,
            ..buffer_at(kind, t)?
        }),
        ([[value, at_c]], Some(kind)) => {
            let certified = Celsius::new(*at_c).map_err(|_| contradiction(lot, *at_c))?;
            let by = value - buffer_at(kind, certified)?.value;
            let at = buffer_at(kind, t)?;
            Ok(StandardValue {
                value: at.value + by,
                u,
                ..at
            })
        }
        ([[value, at_c]], None) => {
            if (t.c() - at_c).abs() > ONE_VALUE_WITHIN_C {
                return Err(OutsideTable {
                    name: lot.number.clone(),
                    temp: t,
                    lowest_c: at_c - ONE_VALUE_WITHIN_C,
                    highest_c: at_c + ONE_VALUE_WITHIN_C,
                }
                .into());
            }
            Ok(StandardValue {
                value: *value,
                u,
                per_c: 0.0,
            })
        }
        (several, _) => {
            let rows: Vec<Row> = several
                .iter()
                .map(|[value, at_c]| Row(*at_c, *value, u))
                .collect();
            Ok(interpolate(&rows, &lot.number, t)?)
        }
    }
}

fn contradiction(lot: &Lot, temp_c: f64) -> LotError {
    LotError::Contradiction {
        number: lot.number.clone(),
        temp_c,
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn lot(kind: &str, values: &[[f64; 2]], u: Option<f64>) -> Lot {
        Lot {
            number: "L123".to_owned(),
            kind: kind.to_owned(),
            opened: None,
            expires: None,
            values: values.to_vec(),
            u,
        }
    }

    fn at(lot: &Lot, c: f64) -> Result<StandardValue, LotError> {
        lot_at(lot, Celsius::new(c).unwrap())
    }

    #[test]
    fn a_certificate_of_several_temperatures_is_the_lot_s_table() {
        let bottle = lot(
            "technical-7",
            &[[7.00, 25.0], [7.02, 20.0], [6.99, 30.0]],
            Some(0.02),
        );
        let got = at(&bottle, 20.0).unwrap();
        assert!(
            (got.value - 7.02).abs() < 1e-12 && (got.u - 0.01).abs() < 1e-15,
            "{got:?}"
        );
        let between = at(&bottle, 27.5).unwrap();
        assert!(
            between.value < 7.0 && between.value > 6.99 && between.per_c < 0.0,
            "{between:?}"
        );
        assert_eq!(
            at(&bottle, 31.0).unwrap_err().to_string(),
            "`L123` has no value at 31 °C: its table goes from 20 °C to 30 °C"
        );
    }

    #[test]
    fn one_certified_value_of_a_standard_buffer_moves_along_its_table() {
        // Phthalate is 4.005 at 25 °C and 4.000 at 20 °C; a lot of 4.009 at 25 °C is 4.004 at 20 °C.
        let bottle = lot("phthalate", &[[4.009, 25.0]], Some(0.01));
        let got = at(&bottle, 20.0).unwrap();
        assert!(
            (got.value - 4.004).abs() < 1e-12 && (got.u - 0.005).abs() < 1e-15,
            "{got:?}"
        );
        assert!(got.per_c > 0.0);
        assert!(at(&bottle, 96.0).is_err());
        assert!(at(&lot("carbonate", &[[10.0, 60.0]], None), 25.0).is_err());
    }

    #[test]
    fn one_value_of_another_liquid_holds_within_two_degrees() {
        let bottle = lot("technical-10", &[[10.01, 25.0]], None);
        for (c, good) in [(22.9, false), (23.0, true), (27.0, true), (27.1, false)] {
            assert_eq!(at(&bottle, c).is_ok(), good, "{c} °C");
        }
        let got = at(&bottle, 26.0).unwrap();
        assert!(
            (got.value - 10.01).abs() < 1e-12
                && (got.u - U_BOTTLE).abs() < 1e-15
                && got.per_c.abs() < 1e-15
        );
        assert_eq!(
            at(&bottle, 30.0).unwrap_err().to_string(),
            "`L123` has no value at 30 °C: its table goes from 23 °C to 27 °C"
        );
    }

    #[test]
    fn without_a_certificate_the_kind_s_table_holds_with_a_bottle_s_u() {
        let got = at(&lot("borax", &[], None), 25.0).unwrap();
        assert!((got.value - 9.180).abs() < 1e-12 && (got.u - 0.02).abs() < 1e-15);
        assert_eq!(
            at(&lot("mystery", &[], None), 25.0)
                .unwrap_err()
                .to_string(),
            "lot `L123` has no values and `mystery` is no buffer with a table"
        );
    }

    #[test]
    fn values_that_contradict_are_refused() {
        let twice = lot("borax", &[[9.18, 25.0], [9.20, 25.0]], None);
        assert_eq!(
            at(&twice, 25.0).unwrap_err().to_string(),
            "lot `L123` has values that cannot stand together at 25 °C"
        );
        assert!(at(&lot("borax", &[[f64::NAN, 25.0]], None), 25.0).is_err());
        assert!(at(&lot("borax", &[[9.18, f64::INFINITY]], None), 25.0).is_err());
        assert!(at(&lot("borax", &[[9.18, -300.0]], None), 25.0).is_err());
    }
}
