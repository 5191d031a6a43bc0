//! # A reading as a row
//!
//! `flags` packs: bits 0–3 the flag's number, bits 4–7 the number of the temperature's source, bits 8 and up the tests not passed.

use super::codec::{N_COLUMNS, NONE, Packed};
use crate::electrode::history::ProbeKind;
use crate::electrode::units::Timestamp;
use crate::watch::flags::{Flag, Tests};
use crate::watch::reading::{
    Reading, TemperatureSource, mv_from_steps, mv_steps, temp_c_from_steps, temp_c_steps,
    u_from_steps, u_steps, value_from_steps, value_steps,
};
use rusqlite::{CachedStatement, Row, params};

/// The columns of a reading behind its point, in the order of [`Packed`].
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

/// A reading as stored.
pub(super) fn pack(kind: ProbeKind, seq: i64, reading: &Reading) -> Packed {
    let flags = i64::from(reading.flag.number())
        | i64::from(reading.temperature_source as u8) << 4
        | i64::from(reading.tests.bits()) << 8;
    let or_none = |figure: Option<i64>| figure.unwrap_or(NONE);
    [
        seq,
        reading.at.ms(),
        or_none(reading.mv.and_then(mv_steps)),
        or_none(reading.temp_c.and_then(temp_c_steps)),
        or_none(reading.value.and_then(|v| value_steps(kind, v))),
        or_none(reading.u.and_then(u_steps)),
        or_none(reading.calibration),
        flags,
    ]
}

/// A stored row as a reading. Bits that no version ever wrote read as flag `fail`: never better than it was.
pub(super) fn unpack(kind: ProbeKind, row: &Packed) -> (i64, Reading) {
    let [seq, t_ms, mv, temp_c, value, u, calibration, flags] = *row;
    let there = |figure: i64| (figure != NONE).then_some(figure);
    let low = |shift: u32| u8::try_from(flags >> shift & 0xf).unwrap_or(0);
    let reading = Reading {
        at: Timestamp::from_ms(t_ms),
        mv: there(mv).map(mv_from_steps),
        temp_c: there(temp_c).map(temp_c_from_steps),
        value: there(value).map(|v| value_from_steps(kind, v)),
        u: there(u).map(u_from_steps),
        calibration: there(calibration),
        flag: Flag::try_from(low(0)).unwrap_or(Flag::Fail),
        tests: Tests::from_bits(u32::try_from(flags >> 8 & 0xffff_ffff).unwrap_or(0)),
        temperature_source: TemperatureSource::from_number(low(4)),
    };
    (seq, reading)
}

/// Writes a row with a statement that takes point, then [`columns`].
pub(super) fn bind(
    statement: &mut CachedStatement<'_>,
    point: i64,
    row: &Packed,
) -> rusqlite::Result<usize> {
    let there = |column: usize| (row[column] != NONE).then_some(row[column]);
    statement.execute(params![
        point,
        row[0],
        row[1],
        there(2),
        there(3),
        there(4),
        there(5),
        there(6),
        row[7]
    ])
}

/// [`columns`] as read, from column `first` on.
pub(super) fn read(row: &Row<'_>, first: usize) -> rusqlite::Result<Packed> {
    let mut packed = [NONE; N_COLUMNS];
    for (column, figure) in packed.iter_mut().enumerate() {
        *figure = row.get::<_, Option<i64>>(first + column)?.unwrap_or(NONE);
    }
    Ok(packed)
}
