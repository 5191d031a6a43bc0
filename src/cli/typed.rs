//! # Figures as people type them: a decimal point, a unit only where asked, never a guess

use std::str::FromStr;

/// Text that is not what the argument wants, with what to write instead.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
#[error("{what}")]
pub(super) struct Mistyped {
    /// What is wrong.
    pub(super) what: String,
    /// What to write instead, as an order.
    pub(super) instead: String,
}

/// A finite figure with a decimal point.
pub(super) fn figure(text: &str) -> Result<f64, Mistyped> {
    let text = text.trim();
    if let Ok(figure) = text.parse::<f64>()
        && figure.is_finite()
    {
        return Ok(figure);
    }
    let with_point = text.replace(',', ".");
    if with_point != text && with_point.parse::<f64>().is_ok() {
        return Err(Mistyped {
            what: format!("`{text}` has a decimal comma"),
            instead: format!("write `{with_point}`"),
        });
    }
    Err(Mistyped {
        what: format!("`{text}` is no figure"),
        instead: "write digits with a decimal point, without a unit, e.g. `7.12`".to_owned(),
    })
}

/// An expanded uncertainty (k = 2): finite and above zero.
pub(super) fn uncertainty(text: &str) -> Result<f64, Mistyped> {
    let u = figure(text)?;
    if u > 0.0 {
        Ok(u)
    } else {
        Err(Mistyped {
            what: format!("an uncertainty of {u} cannot be"),
            instead: "write the expanded uncertainty (k = 2) of the certificate, above zero"
                .to_owned(),
        })
    }
}

/// One `--buffer KIND_OR_PH,MV,TEMP_C[,LOT]`.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct TypedBuffer {
    /// Kind, check solution, or a bare value.
    pub(super) name: String,
    /// Settled reading, mV.
    pub(super) mv: f64,
    /// Temperature, °C.
    pub(super) temp_c: f64,
    /// Lot number.
    pub(super) lot: Option<String>,
}

/// Highest potential an electrode gives; beyond it the input was saturated or a unit is wrong (common practice, no source).
const HIGHEST_MV: f64 = 2_000.0;
/// Liquid buffers: a temperature outside is in another unit or from a broken sensor.
const BUFFER_TEMP_C: std::ops::RangeInclusive<f64> = -10.0..=110.0;

impl FromStr for TypedBuffer {
    type Err = Mistyped;
    fn from_str(text: &str) -> Result<Self, Mistyped> {
        let fields: Vec<&str> = text.split(',').map(str::trim).collect();
        let (name, mv, temp_c, lot) = match *fields.as_slice() {
            [name, mv, temp_c] => (name, mv, temp_c, None),
            [name, mv, temp_c, lot] if !lot.is_empty() => (name, mv, temp_c, Some(lot)),
            _ => {
                let why = if fields.len() > 4 {
                    "; figures take a decimal point, the comma stands between fields"
                } else {
                    ""
                };
                return Err(Mistyped {
                    what: format!(
                        "buffer `{text}` has {} fields, not 3 or 4{why}",
                        fields.len()
                    ),
                    instead: "write KIND_OR_PH,MV,TEMP_C[,LOT], e.g. `phthalate,177.5,25.0,L123`"
                        .to_owned(),
                });
            }
        };
        let (mv, temp_c) = (figure(mv)?, figure(temp_c)?);
        if mv.abs() > HIGHEST_MV {
            return Err(Mistyped {
                what: format!(
                    "{mv} mV in `{text}` is beyond ±{HIGHEST_MV} mV: no electrode gives it"
                ),
                instead: "write the settled reading in mV".to_owned(),
            });
        }
        if !BUFFER_TEMP_C.contains(&temp_c) {
            return Err(Mistyped {
                what: format!("{temp_c} °C in `{text}` is no temperature of a buffer"),
                instead: "write the temperature of the buffer in °C".to_owned(),
            });
        }
        Ok(Self {
            name: name.to_owned(),
            mv,
            temp_c,
            lot: lot.map(str::to_owned),
        })
    }
}

/// One `--value VALUE@TEMP_C` of a certificate.
pub(super) fn certificate_value(text: &str) -> Result<[f64; 2], Mistyped> {
    let Some((value, temp_c)) = text.split_once('@') else {
        return Err(Mistyped {
            what: format!("`{text}` lacks the temperature it holds at"),
            instead: format!("write VALUE@TEMP_C, e.g. `{}@25`", text.trim()),
        });
    };
    let (value, temp_c) = (figure(value)?, figure(temp_c)?);
    if !BUFFER_TEMP_C.contains(&temp_c) {
        return Err(Mistyped {
            what: format!("{temp_c} °C in `{text}` is no temperature of a buffer"),
            instead: "write the temperature of the certificate in °C".to_owned(),
        });
    }
    Ok([value, temp_c])
}

#[cfg(test)]
mod tests {
    use super::*;

    #[track_caller]
    fn refused(text: &str, what: &str) {
        let wrong = text.parse::<TypedBuffer>().unwrap_err();
        assert!(wrong.what.contains(what), "{text}: {}", wrong.what);
    }

    #[test]
    fn a_buffer_is_kind_millivolts_temperature_and_perhaps_a_lot() {
        let buffer: TypedBuffer = "phthalate, 177.5,25.0,L123".parse().unwrap();
        assert_eq!(
            buffer,
            TypedBuffer {
                name: "phthalate".into(),
                mv: 177.5,
                temp_c: 25.0,
                lot: Some("L123".into())
            }
        );
        let bare: TypedBuffer = "7.00,-1.2,24.8".parse().unwrap();
        assert_eq!((bare.name.as_str(), bare.lot), ("7.00", None));
    }

    #[test]
    fn decimal_commas_and_missing_fields_are_refused_with_what_to_write() {
        refused(
            "phthalate,177,5,25,0",
            "5 fields, not 3 or 4; figures take a decimal point",
        );
        refused("phthalate,177.5", "2 fields, not 3 or 4");
        refused("phthalate,177.5,25.0,", "4 fields");
        refused("phthalate,high,25.0", "`high` is no figure");
        refused("phthalate,NaN,25.0", "`NaN` is no figure");
        refused("phthalate,177500,25.0", "177500 mV");
        refused("phthalate,177.5,298.15", "298.15 °C");
        assert_eq!(
            figure("7,12").unwrap_err().instead,
            "write `7.12`",
            "a decimal comma is named as such"
        );
    }

    #[test]
    fn a_certificate_value_says_its_temperature() {
        let [value, temp_c] = certificate_value("4.005@25").unwrap();
        assert!((value - 4.005).abs() < 1e-12 && (temp_c - 25.0).abs() < 1e-12);
        assert_eq!(
            certificate_value("4.005").unwrap_err().instead,
            "write VALUE@TEMP_C, e.g. `4.005@25`"
        );
        assert!(certificate_value("4,005@25").is_err());
        assert!(certificate_value("4.005@298").is_err());
    }

    #[test]
    fn an_uncertainty_is_above_zero() {
        assert!(uncertainty("0").is_err());
        assert!(uncertainty("-0.01").is_err());
        assert!((uncertainty("0.01").unwrap() - 0.01).abs() < 1e-12);
    }
}
