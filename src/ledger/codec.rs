//! # The layout of a sealed hour
//!
//! in: rows of one point. out: a blob, and back. Described with a worked example in DEVELOPERS.md; no other code knows it.

use std::io;

/// The number of this layout in the column `codec`.
pub(super) const CODEC: i64 = 1;

/// How a missing figure stands in [`Rows`].
pub(super) const NONE: i64 = i64::MIN;

/// Columns of a row: seq, `t_ms`, `mv_uv`, `temp_mc`, `value_u`, `u_u`, `calibration_id`, flags.
pub(super) const N_COLUMNS: usize = 8;

/// Column of the sequence number.
pub(super) const SEQ: usize = 0;
/// Column of the time: its differences are coded by their differences.
pub(super) const TIME: usize = 1;
/// Column of the raw potential.
pub(super) const MV: usize = 2;
/// Column of the raw temperature.
pub(super) const TEMP: usize = 3;
/// Column of the value.
pub(super) const VALUE: usize = 4;
/// Column of the uncertainty.
pub(super) const U: usize = 5;
/// Column of flag, tests and source of the temperature.
pub(super) const FLAGS: usize = 7;

const LEVEL: i32 = 3;

/// A row as stored.
pub(super) type Packed = [i64; N_COLUMNS];

/// Rows by column.
#[derive(Debug, Clone, Default, PartialEq, Eq)]
pub(super) struct Rows {
    columns: [Vec<i64>; N_COLUMNS],
}

impl Rows {
    pub(super) fn len(&self) -> usize {
        self.columns[SEQ].len()
    }

    pub(super) fn column(&self, column: usize) -> &[i64] {
        &self.columns[column]
    }

    pub(super) fn push(&mut self, row: &Packed) {
        for (column, figure) in self.columns.iter_mut().zip(row) {
            column.push(*figure);
        }
    }

    pub(super) fn iter(&self) -> impl Iterator<Item = Packed> {
        let columns: [&[i64]; N_COLUMNS] = std::array::from_fn(|column| &*self.columns[column]);
        (0..self.len()).map(move |at| std::array::from_fn(|column| columns[column][at]))
    }
}

/// A blob that does not hold what it should.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
pub(super) enum BlobError {
    /// The compression is broken.
    #[error("the blob cannot be decompressed: {0}")]
    Compression(String),
    /// It ends too early or goes on too long.
    #[error("the blob holds no {0} rows")]
    Length(usize),
}

/// The blob of `rows`.
pub(super) fn encode(rows: &Rows) -> io::Result<Vec<u8>> {
    let mut plain = Vec::with_capacity(rows.len() * N_COLUMNS + 64);
    put(&mut plain, rows.len() as u64);
    for (number, column) in rows.columns.iter().enumerate() {
        encode_column(&mut plain, column, number == TIME);
    }
    zstd::bulk::compress(&plain, LEVEL)
}

/// The `n` rows of a blob, into `rows`.
pub(super) fn decode(data: &[u8], n: usize, rows: &mut Rows) -> Result<(), BlobError> {
    // A varint has at most ten bytes, a column at most 21 and a bit per row besides.
    let limit = n.saturating_mul(N_COLUMNS * 10 + 1).saturating_add(256);
    let plain = zstd::bulk::decompress(data, limit)
        .map_err(|error| BlobError::Compression(error.to_string()))?;
    let mut left = plain.as_slice();
    (|| {
        (take(&mut left)? == n as u64).then_some(())?;
        for (number, column) in rows.columns.iter_mut().enumerate() {
            column.clear();
            decode_column(&mut left, n, number == TIME, column)?;
        }
        left.is_empty().then_some(())
    })()
    .ok_or(BlobError::Length(n))
}

fn encode_column(plain: &mut Vec<u8>, column: &[i64], is_time: bool) {
    let n_there = column.iter().filter(|figure| **figure != NONE).count();
    if n_there == column.len() {
        plain.push(0);
    } else if n_there == 0 {
        plain.push(2);
        return;
    } else {
        plain.push(1);
        for eight in column.chunks(8) {
            let bits = eight.iter().enumerate();
            plain.push(bits.fold(0, |byte, (i, figure)| byte | u8::from(*figure != NONE) << i));
        }
    }
    let mut there = column.iter().copied().filter(|figure| *figure != NONE);
    let first = there.next().unwrap_or_default();
    put(plain, zigzag(first));
    let mut differences = Vec::with_capacity(n_there);
    let (mut before, mut slope) = (first, 0_i64);
    for figure in there {
        let difference = figure.wrapping_sub(before);
        before = figure;
        differences.push(if is_time {
            let change = difference.wrapping_sub(slope);
            slope = difference;
            change
        } else {
            difference
        });
    }
    let step = differences
        .iter()
        .fold(0, |step, d| common(step, d.unsigned_abs()));
    put(plain, step);
    for difference in differences {
        let Some(whole) = difference.unsigned_abs().checked_div(step) else {
            break;
        };
        let whole = whole.cast_signed();
        put(
            plain,
            zigzag(if difference < 0 {
                whole.wrapping_neg()
            } else {
                whole
            }),
        );
    }
}

fn decode_column(left: &mut &[u8], n: usize, is_time: bool, column: &mut Vec<i64>) -> Option<()> {
    let (kind, rest) = left.split_first()?;
    *left = rest;
    let mut bitmap: &[u8] = &[];
    let n_there = match kind {
        0 => n,
        1 => {
            (bitmap, *left) = left.split_at_checked(n.div_ceil(8))?;
            bitmap.iter().map(|byte| byte.count_ones() as usize).sum()
        }
        2 => {
            column.resize(n, NONE);
            return Some(());
        }
        _ => return None,
    };
    if n_there == 0 {
        return None;
    }
    let mut figure = unzigzag(take(left)?);
    let step = take(left)?.cast_signed();
    column.push(figure);
    if step == 0 {
        column.resize(n_there, figure);
    } else if is_time {
        let mut slope = 0_i64;
        for _ in 1..n_there {
            slope = slope.wrapping_add(unzigzag(take(left)?).wrapping_mul(step));
            figure = figure.wrapping_add(slope);
            column.push(figure);
        }
    } else {
        for _ in 1..n_there {
            figure = figure.wrapping_add(unzigzag(take(left)?).wrapping_mul(step));
            column.push(figure);
        }
    }
    if *kind == 1 {
        let mut there = std::mem::take(column).into_iter();
        for at in 0..n {
            let bit = bitmap.get(at / 8)? >> (at % 8) & 1;
            column.push(if bit == 1 { there.next()? } else { NONE });
        }
        if there.next().is_some() {
            return None;
        }
    }
    Some(())
}

/// Small figures of either sign as small unsigned ones: 0, -1, 1, -2, 2 become 0, 1, 2, 3, 4.
const fn zigzag(figure: i64) -> u64 {
    (figure << 1 ^ figure >> 63).cast_unsigned()
}

const fn unzigzag(zigzagged: u64) -> i64 {
    (zigzagged >> 1).cast_signed() ^ -((zigzagged & 1).cast_signed())
}

/// Seven bits a byte, the lowest first; the highest bit says that more follow.
fn put(plain: &mut Vec<u8>, mut number: u64) {
    loop {
        let [low, ..] = number.to_le_bytes();
        number >>= 7;
        if number == 0 {
            plain.push(low);
            return;
        }
        plain.push(low | 0x80);
    }
}

#[inline]
fn take(left: &mut &[u8]) -> Option<u64> {
    let (&first, rest) = left.split_first()?;
    *left = rest;
    if first < 0x80 {
        return Some(u64::from(first));
    }
    let mut number = u64::from(first & 0x7f);
    for shift in (7..64).step_by(7) {
        let (&byte, rest) = left.split_first()?;
        *left = rest;
        number |= u64::from(byte & 0x7f) << shift;
        if byte < 0x80 {
            return Some(number);
        }
    }
    None
}

/// The largest common divisor.
const fn common(mut a: u64, mut b: u64) -> u64 {
    if a == 1 {
        return 1;
    }
    while b > 0 {
        (a, b) = (b, a % b);
    }
    a
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    fn figure() -> impl Strategy<Value = i64> {
        prop_oneof![
            Just(NONE),
            -50..50_i64,
            any::<i64>(),
            Just(i64::MAX),
            Just(NONE + 1)
        ]
    }

    #[test]
    fn the_worked_example_of_the_documentation_is_what_is_written() {
        let mut rows = Rows::default();
        for (seq, t_ms, mv, temp_c, value) in [
            (41, 1_772_457_240_000, -177_480, 25_000, 71_234),
            (49, 1_772_457_241_000, -177_480, NONE, 71_230),
            (57, 1_772_457_242_003, -177_300, 25_000, 71_234),
        ] {
            rows.push(&[seq, t_ms, mv, temp_c, value, NONE, 3, 17]);
        }
        let plain = zstd::bulk::decompress(&encode(&rows).unwrap(), 1_000).unwrap();
        let hex: Vec<String> = plain.iter().map(|byte| format!("{byte:02x}")).collect();
        let text = include_str!("../../DEVELOPERS.md");
        let (_, example) = text.split_once("```codec-1\n").unwrap();
        let (example, _) = example.split_once("```").unwrap();
        let written: Vec<&str> = example
            .lines()
            .flat_map(|line| line.split("  ").next().unwrap_or("").split_whitespace())
            .collect();
        assert_eq!(written, hex);
    }

    proptest! {
        #[test]
        fn any_rows_come_back_as_they_were(given in prop::collection::vec(prop::array::uniform8(figure()), 1..200)) {
            let mut rows = Rows::default();
            for row in &given {
                rows.push(row);
            }
            let blob = encode(&rows).unwrap();
            let mut back = Rows::default();
            decode(&blob, given.len(), &mut back).unwrap();
            prop_assert_eq!(&back, &rows);
            prop_assert!(decode(&blob, given.len() + 1, &mut back).is_err());
        }

        #[test]
        fn no_bytes_make_the_decoder_fall(plain in prop::collection::vec(any::<u8>(), 0..200), n in 0..50_usize) {
            let mut rows = Rows::default();
            let _told: Result<(), BlobError> = decode(&plain, n, &mut rows);
            let blob = zstd::bulk::compress(&plain, LEVEL).unwrap();
            if decode(&blob, n, &mut rows).is_ok() {
                prop_assert_eq!(rows.len(), n);
            }
        }
    }
}
