//! # What simulated meters say: text lines and Modbus frames, as bytes
//!
//! in: bytes of a question, what the meters show. out: bytes of an answer. No port, no clock.

use super::electrode::Shown;

/// What is spoken on a simulated line.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum Talk {
    /// One meter that prints a line every second, e.g. `   -23.4 mV  18.2 C`, CR LF.
    Stream,
    /// One meter that answers this question with a line, e.g. `MV -23.4 T 18.2`, CR LF, after 50 to 150 ms.
    Query {
        /// The question, with its line end.
        ask: Vec<u8>,
    },
    /// Modbus RTU meters with these unit addresses on one bus: register 0 is tenths of a mV, register 1 tenths of a °C, both
    /// signed, alike as input and as holding registers.
    ModbusRtu {
        /// Addresses, 1 to 247, in the order of the meters.
        units: Vec<u8>,
    },
}

/// Function codes that read holding (3) and input (4) registers.
///
/// - **Source** MODBUS Application Protocol Specification V1.1b3, sections 6.3 and 6.4 (from memory), as the exception codes below.
const READ_FUNCTIONS: [u8; 2] = [3, 4];
const ILLEGAL_FUNCTION: u8 = 1;
const ILLEGAL_ADDRESS: u8 = 2;
const ILLEGAL_VALUE: u8 = 3;

/// The line of a meter that talks on its own.
pub(super) fn stream_line(shown: Shown) -> Vec<u8> {
    format!("{:>8.1} mV {:>5.1} C\r\n", shown.mv, shown.temp_c).into_bytes()
}

/// The answer of a meter that was asked.
pub(super) fn query_line(shown: Shown) -> Vec<u8> {
    format!("MV {:.1} T {:.1}\r\n", shown.mv, shown.temp_c).into_bytes()
}

/// A Modbus request for registers: which meter on the bus, and the frame.
pub(super) struct Request {
    /// Index into the bus's units.
    pub(super) meter: usize,
    frame: [u8; 8],
}

/// The last whole request to one of `units` in `bytes`, whatever noise stands around it.
pub(super) fn find_request(units: &[u8], bytes: &[u8]) -> Option<Request> {
    bytes.windows(8).rev().find_map(|window| {
        let frame = <[u8; 8]>::try_from(window).ok()?;
        let meter = units.iter().position(|unit| *unit == frame[0])?;
        (crc(&frame[..6]) == frame[6..]).then_some(Request { meter, frame })
    })
}

/// The answer of the asked meter: registers, or the exception that says why not.
pub(super) fn modbus_answer(request: &Request, shown: Shown) -> Vec<u8> {
    let [unit, function, a1, a0, n1, n0, _, _] = request.frame;
    let address = usize::from(u16::from_be_bytes([a1, a0]));
    let n_registers = usize::from(u16::from_be_bytes([n1, n0]));
    let registers = [register(shown.mv), register(shown.temp_c)];
    let exception = |code| vec![unit, function | 0x80, code];
    let mut answer = if !READ_FUNCTIONS.contains(&function) {
        exception(ILLEGAL_FUNCTION)
    } else if !(1..=125).contains(&n_registers) {
        exception(ILLEGAL_VALUE)
    } else if let Some(asked) = registers.get(address..address + n_registers) {
        let mut answer = vec![unit, function];
        answer.extend(u8::try_from(2 * n_registers));
        answer.extend(asked.iter().flat_map(|register| register.to_be_bytes()));
        answer
    } else {
        exception(ILLEGAL_ADDRESS)
    };
    let crc = crc(&answer);
    answer.extend(crc);
    answer
}

/// A figure in tenths, as a signed register; at the end of its scale when it does not fit.
fn register(figure: f64) -> i16 {
    #[expect(
        clippy::cast_possible_truncation,
        reason = "a cast from f64 saturates, as the meter does"
    )]
    let tenths = (figure * 10.0).round() as i16;
    tenths
}

/// The check of a frame, in the order it goes over the wire: reflected polynomial 0xA001 from 0xFFFF, low byte first.
///
/// - **Source** MODBUS over Serial Line Specification V1.02, appendix B (from memory).
pub(super) fn crc(bytes: &[u8]) -> [u8; 2] {
    let mut crc = 0xFFFF_u16;
    for byte in bytes {
        crc ^= u16::from(*byte);
        for _ in 0..8 {
            crc = if crc & 1 == 1 {
                (crc >> 1) ^ 0xA001
            } else {
                crc >> 1
            };
        }
    }
    crc.to_le_bytes()
}

#[cfg(test)]
mod tests {
    use super::*;

    const SHOWN: Shown = Shown {
        mv: -23.4,
        temp_c: 18.2,
    };

    /// What `units` answer to a frame whose check is added here, as hexadecimal.
    fn check(units: &[u8], request: &[u8], answer: Option<&str>) {
        let mut bytes = request.to_vec();
        bytes.extend(crc(request));
        let got = find_request(units, &bytes).map(|request| {
            modbus_answer(&request, SHOWN)
                .iter()
                .map(|byte| format!("{byte:02x}"))
                .collect::<Vec<_>>()
                .join(" ")
        });
        assert_eq!(got.as_deref(), answer, "asked {request:02x?}");
    }

    #[test]
    fn the_check_of_a_frame_is_that_of_other_programs() {
        // Source: check value of CRC-16/MODBUS over the digits 1 to 9, 0x4B37, catalogue of parametrised CRC algorithms (Cook), from memory.
        assert_eq!(crc(b"123456789"), [0x37, 0x4B]);
        // Source: computed with a general CRC library (Python `crcmod`, predefined "modbus").
        assert_eq!(crc(&[1, 4, 0, 0, 0, 2]), [0x71, 0xCB]);
    }

    #[test]
    fn registers_are_answered_and_everything_else_is_refused_with_its_code() {
        let units = [11, 12];
        // −23.4 mV is −234, ff16 as a signed word; 18.2 °C is 182, 00b6.
        let [low, high] = crc(&[12, 4, 4, 0xFF, 0x16, 0x00, 0xB6]);
        let answer = format!("0c 04 04 ff 16 00 b6 {low:02x} {high:02x}");
        check(&units, &[12, 4, 0, 0, 0, 2], Some(&answer));
        for (request, start) in [
            ([12, 3, 0, 1, 0, 1], vec![12, 3, 2, 0x00, 0xB6]),
            ([12, 4, 0, 1, 0, 2], vec![12, 0x84, ILLEGAL_ADDRESS]),
            ([12, 4, 0, 0, 0, 0], vec![12, 0x84, ILLEGAL_VALUE]),
            ([12, 6, 0, 0, 0, 1], vec![12, 0x86, ILLEGAL_FUNCTION]),
        ] {
            let mut whole = start.clone();
            whole.extend(crc(&start));
            let text: Vec<_> = whole.iter().map(|byte| format!("{byte:02x}")).collect();
            check(&units, &request, Some(&text.join(" ")));
        }
        check(&units, &[13, 4, 0, 0, 0, 2], None);
    }

    #[test]
    fn a_request_is_found_behind_noise_and_not_in_a_damaged_frame() {
        let mut bytes = vec![0x00, 0xFF, 11, 4];
        bytes.extend([11, 4, 0, 0, 0, 2]);
        bytes.extend(crc(&[11, 4, 0, 0, 0, 2]));
        assert!(find_request(&[11], &bytes).is_some());
        let last = bytes.len() - 1;
        bytes[last] ^= 1;
        assert!(find_request(&[11], &bytes).is_none());
    }

    #[test]
    fn lines_are_as_the_meters_print_them() {
        assert_eq!(stream_line(SHOWN), b"   -23.4 mV  18.2 C\r\n");
        assert_eq!(query_line(SHOWN), b"MV -23.4 T 18.2\r\n");
    }
}
