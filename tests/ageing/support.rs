//! What the tests of the ageing model share.

use halfcell::electrode::ageing::{Kind, Observation, Row};
use halfcell::electrode::history::{Dated, ElectrodeLine, EventId};
use halfcell::electrode::units::Timestamp;

pub(crate) const K25: f64 = 59.159_349;

/// `days` after an arbitrary beginning.
pub(crate) fn after_days(days: f64) -> Timestamp {
    #[expect(clippy::cast_possible_truncation, reason = "days of a test in ms")]
    Timestamp::from_ms((days * 86_400_000.0).round() as i64)
}

/// A line without uncertainty.
pub(crate) fn line(offset_mv: f64, slope: f64) -> ElectrodeLine {
    ElectrodeLine {
        offset_mv,
        slope,
        var_offset_mv2: 0.0,
        var_slope: 0.0,
        cov_mv: 0.0,
    }
}

/// A check in buffers of these pH at 25 °C by an electrode of this offset and slope; `sd_mv` is the standard uncertainty of each row.
pub(crate) fn check(
    event: EventId,
    days: f64,
    phs: &[f64],
    (offset, slope): (f64, f64),
    sd_mv: f64,
) -> Observation {
    Observation {
        at: after_days(days),
        event,
        kind: if phs.len() > 1 {
            Kind::Calibration
        } else {
            Kind::Verification
        },
        rows: phs
            .iter()
            .map(|ph| {
                let x = K25 * (7.0 - ph);
                Row {
                    h: [1.0, x],
                    y_mv: offset + slope * x,
                    var_mv2: sd_mv * sd_mv,
                }
            })
            .collect(),
        shared_var_mv2: 0.36,
        jump: [0.0; 2],
        confirmed: false,
    }
}

/// A fact entered when it was so.
pub(crate) fn dated<T>(id: EventId, days: f64, fact: T) -> Dated<T> {
    Dated {
        id,
        at: after_days(days),
        entered: after_days(days),
        by: "M. Oake".into(),
        fact,
    }
}
