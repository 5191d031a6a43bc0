//! # Checksums of text lines and of Modbus frames

use crate::config::site::Checksum;

/// The Modbus CRC: reflected polynomial 0xA001, start 0xFFFF (MODBUS over Serial Line V1.02, section 6.2.2).
///
/// On the wire of a Modbus line the low byte goes first.
pub fn crc16_modbus(bytes: &[u8]) -> u16 {
    bytes.iter().fold(0xFFFF, |crc, &byte| {
        (0..8).fold(crc ^ u16::from(byte), |crc, _| {
            if crc & 1 == 1 {
                (crc >> 1) ^ 0xA001
            } else {
                crc >> 1
            }
        })
    })
}

/// The line without its checksum, when the checksum is right.
///
/// The digits stand behind the last `*`, or else are the last field (fields are parted by blanks, `,` or `;`). They cover every byte
/// before the `*`; a last field covers every byte before it, with or without the separator; a `$` that opens the line is not covered
/// where that is what makes it right.
pub fn body(line: &[u8], checksum: Checksum) -> Option<&[u8]> {
    let line = line.trim_ascii_end();
    let (covered, digits) = parts(line)?;
    let wanted = match checksum {
        Checksum::Xor | Checksum::Sum8 if digits.len() == 2 => hexadecimal(digits)?,
        Checksum::Crc16Modbus if digits.len() == 4 => hexadecimal(digits)?,
        Checksum::Xor | Checksum::Sum8 | Checksum::Crc16Modbus => return None,
    };
    let bare = covered.strip_suffix(b"*").unwrap_or(covered);
    let shorter = bare
        .strip_suffix(b" ")
        .or(bare.strip_suffix(b","))
        .or(bare.strip_suffix(b";"));
    [Some(bare), shorter, bare.strip_prefix(b"$")]
        .into_iter()
        .flatten()
        .any(|covered| of(covered, checksum) == wanted)
        .then_some(bare)
}

/// Everything up to the checksum's digits, and the digits.
fn parts(line: &[u8]) -> Option<(&[u8], &[u8])> {
    let behind = |found: usize| line.split_at_checked(found + 1);
    match line.iter().rposition(|&b| b == b'*') {
        Some(star) => behind(star),
        None => behind(line.iter().rposition(|b| b" \t,;".contains(b))?),
    }
}

fn hexadecimal(digits: &[u8]) -> Option<u16> {
    if !digits.iter().all(u8::is_ascii_hexdigit) {
        return None;
    }
    u16::from_str_radix(str::from_utf8(digits).ok()?, 16).ok()
}

fn of(bytes: &[u8], checksum: Checksum) -> u16 {
    match checksum {
        Checksum::Xor => u16::from(bytes.iter().fold(0, |all, b| all ^ b)),
        Checksum::Sum8 => u16::from(bytes.iter().fold(0_u8, |all, b| all.wrapping_add(*b))),
        Checksum::Crc16Modbus => crc16_modbus(bytes),
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    #[test]
    fn the_modbus_crc_of_a_published_frame_is_right() {
        // Source: MODBUS over Serial Line V1.02, section 6.2.2 (from memory): the CRC of 02 07 is 0x1241, sent as 41 12.
        assert_eq!(crc16_modbus(&[0x02, 0x07]), 0x1241);
    }

    #[test]
    fn a_line_with_its_right_checksum_gives_its_body() {
        let text = b"2025-11-02 01:30:00,-12.1,18.0";
        for checksum in [Checksum::Xor, Checksum::Sum8] {
            let line = [
                text.as_slice(),
                format!("*{:02X}", of(text, checksum)).as_bytes(),
            ]
            .concat();
            assert_eq!(body(&line, checksum), Some(text.as_slice()), "{checksum}");
        }
        let line = format!(
            "#03 -0.4 24.9 {:02x}\r",
            of(b"#03 -0.4 24.9", Checksum::Sum8)
        );
        assert_eq!(
            body(line.as_bytes(), Checksum::Sum8),
            Some(b"#03 -0.4 24.9 ".as_slice())
        );
        let line = format!("-12.1 18.0*{:04x}", crc16_modbus(b"-12.1 18.0"));
        assert_eq!(
            body(line.as_bytes(), Checksum::Crc16Modbus),
            Some(b"-12.1 18.0".as_slice())
        );
    }

    proptest! {
        #[test]
        fn one_changed_byte_never_passes_an_exclusive_or(text in "[ -)+-~]{1,40}", at in 0_usize..40, flip in 1_u8..128) {
            let mut line = format!("{text}*{:02X}", of(text.as_bytes(), Checksum::Xor)).into_bytes();
            let at = at % text.len();
            line[at] ^= flip;
            // A `$` at the start, or a flip that makes another `*`, is a different line and not a damaged one.
            prop_assume!(line[0] != b'$' && !text.ends_with([' ', ',', ';']) && !line[text.len() - 1..].starts_with(b" "));
            prop_assume!(!b" ,;".contains(&line[text.len() - 1]));
            prop_assert_eq!(body(&line, Checksum::Xor), None);
        }

        #[test]
        fn no_bytes_break_it(line in proptest::collection::vec(any::<u8>(), 0..300)) {
            for checksum in Checksum::ALL {
                if let Some(body) = body(&line, *checksum) {
                    prop_assert!(line.starts_with(body));
                }
            }
        }
    }
}
