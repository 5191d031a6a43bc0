//! # A figure as meters print it
//!
//! Decimal comma or point, an exponent, a sign that stands apart, plus signs and leading noughts. A thousands mark is never right for a probe.

/// The number, or `None` where it is none.
///
/// Blanks around it, and between sign and digits, are nothing. One `,` is a decimal mark. Not finite is no number.
pub fn number(text: &str) -> Option<f64> {
    let text = text.trim();
    let (negative, digits) = match text.strip_prefix(['-', '+']) {
        Some(rest) => (text.starts_with('-'), rest.trim_start()),
        None => (false, text),
    };
    // Words that Rust reads as numbers (`inf`, `nan`) begin with a letter.
    if !digits.starts_with(|c: char| c.is_ascii_digit() || c == '.' || c == ',') {
        return None;
    }
    let figure: f64 = digits.replacen(',', ".", 1).parse().ok()?;
    figure
        .is_finite()
        .then_some(if negative { -figure } else { figure })
}

/// Characters of a line as a pattern sees them: each byte the character of its value (a degree sign is not UTF-8 on many meters),
/// the two Unicode dashes and the one of code page 1252 that stand for a minus turned into `-`, flow-control bytes left out.
pub fn characters(line: &[u8]) -> String {
    let mut text = String::with_capacity(line.len());
    let mut rest = line;
    while let [byte, tail @ ..] = rest {
        rest = tail;
        if let Some(tail) = rest_of_dash(*byte, tail) {
            text.push('-');
            rest = tail;
        } else if !matches!(byte, 0x11 | 0x13) {
            text.push(char::from(*byte));
        }
    }
    text
}

/// What follows, when here stands a dash that means minus: U+2212, U+2013 or byte 0x96.
fn rest_of_dash(byte: u8, tail: &[u8]) -> Option<&[u8]> {
    match (byte, tail) {
        (0xE2, [0x88, 0x92, rest @ ..] | [0x80, 0x93, rest @ ..]) | (0x96, rest) => Some(rest),
        _ => None,
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    #[test]
    fn figures_as_meters_print_them() {
        let cases: &[(&str, f64)] = &[
            ("-177.5", -177.5),
            ("+0012,3", 12.3),
            ("- 12.3", -12.3),
            ("1,234", 1.234),
            ("-1.5E-3", -0.0015),
            (".5", 0.5),
            (" 25 ", 25.0),
        ];
        for (text, figure) in cases {
            assert_eq!(number(text), Some(*figure), "`{text}`");
        }
    }

    #[test]
    fn what_is_no_number_is_none() {
        for text in [
            "", "-", "----", "OL", "inf", "-nan", "1.2.3", "1,234.5", "--5", "12..", "1e999",
            "0x10", "+-3",
        ] {
            assert_eq!(number(text), None, "`{text}`");
        }
    }

    #[test]
    fn a_degree_sign_and_a_dash_that_are_no_ascii_are_read() {
        assert_eq!(characters(b"7.02pH\xB0C"), "7.02pH°C");
        assert_eq!(characters("\u{2212}12.3 \u{2013}4".as_bytes()), "-12.3 -4");
        assert_eq!(characters(b"\x961\x11\x13"), "-1");
    }

    proptest! {
        #[test]
        fn a_printed_number_is_read_back(figure in -1.0e6_f64..1.0e6, comma in any::<bool>()) {
            let text = if comma { figure.to_string().replace('.', ",") } else { figure.to_string() };
            prop_assert_eq!(number(&text), Some(figure));
        }

        #[test]
        fn no_text_gives_a_number_that_is_not_finite(text in ".{0,30}") {
            if let Some(figure) = number(&text) {
                prop_assert!(figure.is_finite());
            }
        }
    }
}
