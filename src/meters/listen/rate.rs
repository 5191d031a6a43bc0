//! # Silent, wrong rate, or text

use super::super::splitter::LONGEST;
use crate::config::site::Parity;

/// Rates worth trying, the commonest first (common practice, no source).
pub const RATES: [u32; 8] = [9600, 19_200, 4800, 115_200, 2400, 38_400, 57_600, 1200];

/// Whole lines that are enough to tell text from chance.
pub const ENOUGH_LINES: usize = 3;

/// Bytes without a line of text after which more of them would not change the mind.
pub const ENOUGH_JUNK: usize = 64;

/// What was heard at one rate.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum Heard {
    /// Nothing at all.
    Silent,
    /// Too little to say anything.
    Little,
    /// Bytes that are no text: another rate or frame, or no text meter.
    Junk,
    /// Text.
    Text {
        /// Whole lines, in order, without the first and the last if they may be cut.
        lines: Vec<Vec<u8>>,
        /// The parity that stands in the eighth bit, when the meter sends seven.
        seven_bits: Option<Parity>,
        /// What ends a line, where it is neither CR nor LF.
        terminator: Option<Vec<u8>>,
    },
}

/// What these bytes, heard in one go since the port was opened, are.
pub fn heard(bytes: &[u8]) -> Heard {
    if bytes.is_empty() {
        return Heard::Silent;
    }
    let stripped: Vec<u8>;
    let (bytes, seven_bits) = match parity_in_bit_eight(bytes) {
        Some(parity) => {
            stripped = bytes.iter().map(|b| b & 0x7F).collect();
            (stripped.as_slice(), Some(parity))
        }
        None => (bytes, None),
    };
    for (end, terminator) in [(&b"\r\n"[..], None), (&b"\x03"[..], Some(vec![3]))] {
        let lines = lines(bytes, end);
        if lines.is_empty() {
            continue;
        }
        let good = lines.iter().filter(|line| is_text(line)).count();
        // One damaged line in eight is a noisy cable; more is another rate.
        if lines.len() >= ENOUGH_LINES && good * 8 >= lines.len() * 7 {
            let lines = lines
                .into_iter()
                .filter(|line| is_text(line))
                .map(<[u8]>::to_vec)
                .collect();
            return Heard::Text {
                lines,
                seven_bits,
                terminator,
            };
        }
        if lines.len() < ENOUGH_LINES && good == lines.len() {
            return Heard::Little;
        }
    }
    let printable = bytes.iter().filter(|b| is_printable(**b)).count();
    if bytes.len() < ENOUGH_JUNK || printable == bytes.len() && bytes.len() <= LONGEST {
        Heard::Little
    } else {
        Heard::Junk
    }
}

/// The lines between the first end and the last: what stands outside may be cut.
fn lines<'a>(bytes: &'a [u8], ends: &[u8]) -> Vec<&'a [u8]> {
    let mut pieces: Vec<&[u8]> = bytes.split(|b| ends.contains(b)).collect();
    pieces.pop();
    let mut whole = pieces.into_iter();
    whole.next();
    whole.filter(|line| !line.is_empty()).collect()
}

/// Whether a line could have been printed by a meter.
fn is_text(line: &[u8]) -> bool {
    line.len() <= LONGEST
        && line.iter().all(|b| is_printable(*b))
        && line.iter().any(u8::is_ascii_graphic)
}

/// ASCII, and what stands for °, µ and a long minus in the usual code pages and in UTF-8.
fn is_printable(byte: u8) -> bool {
    matches!(
        byte,
        b' '..=b'~'
            | b'\t'
            | b'\r'
            | b'\n'
            | 2
            | 3
            | 0x11
            | 0x13
            | 0xB0
            | 0xB5
            | 0xBA
            | 0xC2
            | 0xCE
            | 0xBC
            | 0xE2
            | 0x88
            | 0x92
            | 0x80
            | 0x93
            | 0x96
            | 0xF8
            | 0xE6
    )
}

/// The parity that bit 8 carries, if it does so in every byte and seven bits are text; no parity bit is ever set in plain ASCII.
fn parity_in_bit_eight(bytes: &[u8]) -> Option<Parity> {
    let high = bytes.iter().filter(|b| **b >= 0x80).count();
    // In text about half of all bytes would have the bit set.
    if bytes.len() < 16 || high * 8 < bytes.len() {
        return None;
    }
    let text = bytes
        .iter()
        .all(|b| matches!(b & 0x7F, b' '..=b'~' | b'\t' | b'\r' | b'\n'));
    // A byte is even when all its eight bits together are.
    let even = bytes.iter().filter(|b| b.count_ones() % 2 == 0).count();
    match even {
        _ if !text => None,
        n if n == bytes.len() => Some(Parity::Even),
        0 => Some(Parity::Odd),
        _ => None,
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn texts(heard: &Heard) -> Vec<String> {
        match heard {
            Heard::Text { lines, .. } => lines
                .iter()
                .map(|l| String::from_utf8_lossy(l).into_owned())
                .collect(),
            Heard::Silent | Heard::Little | Heard::Junk => Vec::new(),
        }
    }

    #[test]
    fn a_silent_line_a_wrong_rate_and_text_are_told_apart() {
        assert_eq!(heard(b""), Heard::Silent);
        assert_eq!(heard(b"\xff\x00\x81"), Heard::Little);
        assert_eq!(heard(b"3.4 mV\r\n-23.4 mV\r\n"), Heard::Little);
        let junk: Vec<u8> = (0..200_u8).map(|n| n.wrapping_mul(167) ^ 0x5A).collect();
        assert_eq!(heard(&junk), Heard::Junk);
        assert_eq!(
            texts(&heard(b"4 mV\r\n-23.4 mV\r\n-23.5 mV\r\n-23.5 mV\r\n-2")),
            ["-23.4 mV", "-23.5 mV", "-23.5 mV"]
        );
        assert_eq!(texts(&heard(b"4\x03-23.4\x03-23.5\x03-23.6\x03")).len(), 3);
    }

    #[test]
    fn seven_bits_with_parity_show_in_the_eighth() {
        for (parity, odd) in [(Parity::Even, 0), (Parity::Odd, 1)] {
            let line = b"-23.4 mV  18.2 C\r\n".repeat(5);
            let sent: Vec<u8> = line
                .into_iter()
                .map(|b| {
                    if b.count_ones() % 2 == odd {
                        b
                    } else {
                        b | 0x80
                    }
                })
                .collect();
            let Heard::Text {
                lines, seven_bits, ..
            } = heard(&sent)
            else {
                panic!("{parity}: {:?}", heard(&sent))
            };
            assert_eq!(seven_bits, Some(parity));
            assert_eq!(lines[0], b"-23.4 mV  18.2 C");
        }
    }
}
