//! # A reading as a row
//!
//! `flags` packs: bits 0–3 the flag's number, bits 4–7 the number of the temperature's source, bits 8 and up the tests not passed.

use crate::electrode::history::ProbeKind;
use crate::electrode::units::Timestamp;
use crate::watch::flags::{Flag, Tests};
use crate::watch::reading::{
    Reading, TemperatureSource, mv_from_steps, mv_steps, temp_c_from_steps, temp_c_steps,
    u_from_steps, u_steps, value_from_steps, value_steps,
};
use rusqlite::{CachedStatement, Row, params};

/// The columns of a reading behind its point, in the order of [`bind`] and [`read`].
macro_rules! columns {
    () => {
        "seq, t_ms, mv_uv, temp_mc, value_u, u_u, calibration_id, flags"
    };
}
pub(super) use columns;

/// A point: its row and what it measures, which says how its values are stored.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub struct PointId {
    pub(super) id: i64,
    pub(super) kind: ProbeKind,
}

impl PointId {
    /// What the point measures.
    pub const fn kind(self) -> ProbeKind {
        self.kind
    }
}

/// Writes `reading` with a statement that takes point, then [`columns`].
pub(super) fn bind(
    statement: &mut CachedStatement<'_>,
    point: PointId,
    seq: i64,
    reading: &Reading,
) -> rusqlite::Result<usize> {
    let flags = i64::from(reading.flag.number())
        | i64::from(reading.temperature_source as u8) << 4
        | i64::from(reading.tests.bits()) << 8;
    statement.execute(params![
        point.id,
        seq,
        reading.at.ms(),
        reading.mv.and_then(mv_steps),
        reading.temp_c.and_then(temp_c_steps),
        reading.value.and_then(|v| value_steps(point.kind, v)),
        reading.u.and_then(u_steps),
        reading.calibration,
        flags
    ])
}

/// A row of [`columns`] read back. Bits that no version ever wrote read as flag `fail`: never better than it was.
pub(super) fn read(row: &Row<'_>, kind: ProbeKind) -> rusqlite::Result<(i64, Reading)> {
    let flags: i64 = row.get(7)?;
    let low = |shift: u32| u8::try_from(flags >> shift & 0xf).unwrap_or(0);
    let reading = Reading {
        at: Timestamp::from_ms(row.get(1)?),
        mv: row.get::<_, Option<i64>>(2)?.map(mv_from_steps),
        temp_c: row.get::<_, Option<i64>>(3)?.map(temp_c_from_steps),
        value: row
            .get::<_, Option<i64>>(4)?
            .map(|v| value_from_steps(kind, v)),
        u: row.get::<_, Option<i64>>(5)?.map(u_from_steps),
        calibration: row.get(6)?,
        flag: Flag::try_from(low(0)).unwrap_or(Flag::Fail),
        tests: Tests::from_bits(u32::try_from(flags >> 8 & 0xffff_ffff).unwrap_or(0)),
        temperature_source: TemperatureSource::from_number(low(4)),
    };
    Ok((row.get(0)?, reading))
}
