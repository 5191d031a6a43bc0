//! # Modbus RTU frames: the request, and the one answer that may stand for it
//!
//! Source of the formats: MODBUS Application Protocol V1.1b3 (functions 3 and 4, exceptions) and MODBUS over Serial Line V1.02 (RTU framing).

use super::checksum::crc16_modbus;
use super::sample::Figure;
use crate::config::site::{Layout, Table, WordOrder};
use std::ops::Range;

/// Most registers one request may ask for.
pub const MOST_REGISTERS: u16 = 125;

/// What a unit said.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum Answer {
    /// The registers asked for, all of them.
    Registers(Vec<u16>),
    /// It refused; [`exception_name`] has the words.
    Exception(u8),
}

const fn function(table: Table) -> u8 {
    match table {
        Table::Holding => 3,
        Table::Input => 4,
    }
}

/// The bytes that ask `unit` for `count` registers from `address` on.
pub fn request(unit: u8, table: Table, address: u16, count: u16) -> Vec<u8> {
    let mut frame = vec![unit, function(table)];
    frame.extend(address.to_be_bytes());
    frame.extend(count.to_be_bytes());
    frame.extend(crc16_modbus(&frame).to_le_bytes());
    frame
}

/// Length of the whole answer to such a request, bytes.
pub const fn answer_length(count: u16) -> usize {
    5 + 2 * count as usize
}

/// The awaited answer, wherever it stands in what was heard: unit, function, count and CRC must all be right.
pub fn find(heard: &[u8], unit: u8, table: Table, count: u16) -> Option<(Range<usize>, Answer)> {
    (0..heard.len()).find_map(|from| {
        let rest = heard.get(from..)?;
        match rest {
            [u, f, bytes, ..]
                if *u == unit && *f == function(table) && u16::from(*bytes) == 2 * count =>
            {
                let data = checked(rest.get(..answer_length(count))?)?.get(3..)?;
                let (pairs, _) = data.as_chunks::<2>();
                let registers = pairs.iter().copied().map(u16::from_be_bytes).collect();
                Some((
                    from..from + answer_length(count),
                    Answer::Registers(registers),
                ))
            }
            [u, f, code, ..] if *u == unit && *f == function(table) | 0x80 => {
                checked(rest.get(..5)?)?;
                Some((from..from + 5, Answer::Exception(*code)))
            }
            _ => None,
        }
    })
}

/// The frame without its CRC, if that is right.
fn checked(frame: &[u8]) -> Option<&[u8]> {
    let (data, crc) = frame.split_last_chunk::<2>()?;
    (crc16_modbus(data) == u16::from_le_bytes(*crc)).then_some(data)
}

/// What an exception code means, in the words of the application protocol, section 7.
pub const fn exception_name(code: u8) -> &'static str {
    match code {
        1 => "illegal function",
        2 => "illegal data address",
        3 => "illegal data value",
        4 => "server device failure",
        5 => "acknowledge: it needs longer",
        6 => "server device busy",
        8 => "memory parity error",
        10 => "gateway path unavailable",
        11 => "gateway target device failed to respond",
        _ => "an exception without a name",
    }
}

/// How many registers a figure takes.
pub const fn registers(layout: Layout) -> u16 {
    match layout {
        Layout::I16 | Layout::U16 => 1,
        Layout::I32 | Layout::U32 | Layout::F32 => 2,
    }
}

/// The figure in these registers; `None` when they are too few.
///
/// The rails of a signed number (0x7FFF, 0x8000 and their 32-bit kin) and a float that is not finite are over range.
pub fn figure(words: &[u16], layout: Layout, order: WordOrder, scale: f64) -> Option<Figure> {
    let pair = || match (words, order) {
        ([high, low, ..], WordOrder::Big) | ([low, high, ..], WordOrder::Little) => {
            Some(u32::from(*high) << 16 | u32::from(*low))
        }
        _ => None,
    };
    let number = match layout {
        Layout::U16 => f64::from(*words.first()?),
        Layout::I16 => match words.first()?.cast_signed() {
            i16::MIN | i16::MAX => return Some(Figure::OverRange),
            number => f64::from(number),
        },
        Layout::U32 => f64::from(pair()?),
        Layout::I32 => match pair()?.cast_signed() {
            i32::MIN | i32::MAX => return Some(Figure::OverRange),
            number => f64::from(number),
        },
        Layout::F32 => f64::from(f32::from_bits(pair()?)),
    };
    let scaled = number * scale;
    Some(if scaled.is_finite() {
        Figure::Number(scaled)
    } else {
        Figure::OverRange
    })
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    fn answer(unit: u8, table: Table, words: &[u16]) -> Vec<u8> {
        let mut frame = vec![
            unit,
            function(table),
            u8::try_from(2 * words.len()).unwrap(),
        ];
        frame.extend(words.iter().flat_map(|w| w.to_be_bytes()));
        frame.extend(crc16_modbus(&frame).to_le_bytes());
        frame
    }

    #[test]
    fn both_word_orders_of_a_float_are_read() {
        // 123.45 as IEEE 754 single is 0x42F6E666 (computed with a separate program).
        for (words, order) in [
            ([0x42F6, 0xE666], WordOrder::Big),
            ([0xE666, 0x42F6], WordOrder::Little),
        ] {
            let Some(Figure::Number(number)) = figure(&words, Layout::F32, order, 1.0) else {
                panic!("no number")
            };
            assert!(
                (number - 123.45).abs() < 4e-6,
                "{number}: a single has 24 bits"
            );
        }
    }

    #[test]
    fn rails_and_floats_that_are_none_are_over_range() {
        let over = Some(Figure::OverRange);
        for word in [0x7FFF, 0x8000] {
            assert_eq!(figure(&[word], Layout::I16, WordOrder::Big, 0.1), over);
        }
        assert_eq!(
            figure(&[0x7FFF, 0xFFFF], Layout::I32, WordOrder::Big, 0.1),
            over
        );
        assert_eq!(
            figure(&[0x0000, 0x8000], Layout::I32, WordOrder::Little, 0.1),
            over
        );
        for word in [0x7FC0, 0x7F80, 0xFF80] {
            assert_eq!(figure(&[word, 0], Layout::F32, WordOrder::Big, 1.0), over);
        }
        assert_eq!(
            figure(&[0xFFFE], Layout::I16, WordOrder::Big, 0.5),
            Some(Figure::Number(-1.0))
        );
        assert_eq!(
            figure(&[1, 2], Layout::U32, WordOrder::Big, 1.0),
            Some(Figure::Number(65_538.0))
        );
        assert_eq!(figure(&[1], Layout::U32, WordOrder::Big, 1.0), None);
    }

    proptest! {
        #[test]
        fn an_answer_is_found_in_any_junk_and_only_the_awaited_one(
            before in proptest::collection::vec(any::<u8>(), 0..60),
            after in proptest::collection::vec(any::<u8>(), 0..60),
            words in proptest::collection::vec(any::<u16>(), 1..20),
            unit in 1_u8..248,
        ) {
            let count = u16::try_from(words.len()).unwrap();
            let heard = [before.clone(), answer(unit, Table::Input, &words), after].concat();
            let (range, found) = find(&heard, unit, Table::Input, count).unwrap();
            // Junk may hold a right frame of its own with a chance of 1 in 65536 per header; it would stand before ours.
            if range.start == before.len() {
                prop_assert_eq!(found, Answer::Registers(words));
            }
            let alone = answer(unit, Table::Input, &vec![7; usize::from(count)]);
            prop_assert_eq!(find(&alone, unit, Table::Input, count + 1), None);
            prop_assert_eq!(find(&alone, unit ^ 1, Table::Input, count), None);
            prop_assert_eq!(find(&alone, unit, Table::Holding, count), None);
            prop_assert_eq!(find(&alone[..alone.len() - 1], unit, Table::Input, count), None);
        }
    }
}
