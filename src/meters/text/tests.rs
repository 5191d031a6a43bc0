//! Lines as meters print them, and lines that must give nothing.

use super::*;
use crate::config::site::Source;
use proptest::prelude::*;

/// The pattern of the configuration example.
const PLAIN: &str = r"(?<mv>[-+]?\d+[.,]\d+)\s*mV\s+(?<temp_c>[-+]?\d+[.,]\d+)";

fn decoder(
    pattern: &str,
    scale: f64,
    checksum: Option<Checksum>,
    over_range: &[&str],
) -> TextDecoder {
    let text = TextShape {
        pattern: pattern.to_owned(),
        terminator: None,
        checksum,
        over_range: over_range.iter().map(|w| (*w).to_owned()).collect(),
    };
    let signal = |name: &str, scale| Signal {
        name: name.to_owned(),
        scale,
        register: None,
    };
    let meter = Meter {
        name: "m".to_owned(),
        line: 0,
        source: Source::Stream { text: text.clone() },
        signals: vec![signal("mv", scale), signal("temp_c", 1.0)],
    };
    TextDecoder::new(0, &meter, &text).unwrap()
}

fn figures(decoder: &TextDecoder, line: &[u8]) -> Result<Vec<Option<Figure>>, Reason> {
    decoder.decode(line).map(|sample| sample.figures)
}

#[expect(clippy::unnecessary_wraps, reason = "compared with what comes back")]
fn numbers(mv: f64, temp_c: f64) -> Result<Vec<Option<Figure>>, Reason> {
    Ok(vec![Some(Figure::Number(mv)), Some(Figure::Number(temp_c))])
}

#[test]
fn lines_as_meters_print_them_give_their_figures() {
    let plain = decoder(PLAIN, 1.0, None, &[]);
    assert_eq!(
        figures(&plain, b"  -177.5 mV   25.0 C"),
        numbers(-177.5, 25.0)
    );
    assert_eq!(
        figures(&plain, b"-177,48mV +25,02 \xB0C"),
        numbers(-177.48, 25.02)
    );
    assert_eq!(
        figures(&plain, "\u{2212}12.3 mV 25.0".as_bytes()),
        numbers(-12.3, 25.0)
    );
    assert_eq!(figures(&plain, b"- 12.3 mV 25.0"), numbers(-12.3, 25.0));
    let semicolons = decoder(r"CH1;(?<mv>[^;]+);mV;(?<temp_c>[^;]+);C", 1.0, None, &[]);
    assert_eq!(
        figures(&semicolons, b"CH1;+0012,3;mV;+018,40;C;OK"),
        numbers(12.3, 18.4)
    );
    let volts = decoder(r"(?<mv>\S+) V,(?<temp_c>\S+)", 1000.0, None, &[]);
    assert_eq!(figures(&volts, b"-1.25e-1 V,21.5"), numbers(-125.0, 21.5));
    let alone = decoder(
        r"(?<mv>[-+]?\d+\.\d+) mV(?: (?<temp_c>\d+\.\d+))?",
        -1.0,
        None,
        &[],
    );
    assert_eq!(
        figures(&alone, b"12.5 mV"),
        Ok(vec![Some(Figure::Number(-12.5)), None])
    );
}

#[test]
fn over_range_words_are_figures_of_their_own() {
    let words = decoder(PLAIN, 1.0, None, &["----", "OL"]);
    let over = Ok(vec![Some(Figure::OverRange), Some(Figure::Number(25.1))]);
    assert_eq!(figures(&words, b" ----  mV  25.1 C"), over);
    assert_eq!(figures(&words, b" ------  mV  25.1 C"), over);
    assert_eq!(figures(&words, b"OL mV 25.1 C"), over);
    assert_eq!(
        figures(&words, b"-12.0 mV OL C"),
        Ok(vec![Some(Figure::Number(-12.0)), Some(Figure::OverRange)])
    );
    assert_eq!(figures(&words, b"COLD mV 25.1 C"), Err(Reason::NoMatch));
    let rail = decoder(PLAIN, 1.0, None, &["+1999.9"]);
    assert_eq!(figures(&rail, b"+1999.9 mV 25.1 C"), over);
}

#[test]
fn a_part_of_a_figure_is_never_a_value() {
    let plain = decoder(PLAIN, 1.0, None, &[]);
    // The pattern's `\d+[.,]\d+` would take "1.2" out of these.
    let loose = decoder(r"(?<mv>\d[.,]\d)", 1.0, None, &[]);
    assert_eq!(figures(&loose, b"1.25 mV"), Err(Reason::Figure));
    assert_eq!(figures(&loose, b"11.2 mV"), Err(Reason::Figure));
    assert_eq!(
        figures(&loose, b"T-1.2 mV"),
        Err(Reason::Figure),
        "a dash that may be a hyphen"
    );
    assert_eq!(
        figures(&decoder(r"(?<mv>\d+\.\d+)", 1.0, None, &[]), b"-12.3"),
        Ok(vec![Some(Figure::Number(-12.3)), None])
    );
    assert_eq!(
        figures(
            &decoder(r"(?<mv>[-+]?\d+[.,]\d+)", 1.0, None, &[]),
            b"1,234.5"
        ),
        Err(Reason::Figure)
    );
    assert_eq!(figures(&plain, b"-17\x007.5 mV 25.0"), Err(Reason::Damaged));
    assert_eq!(figures(&plain, b"pH 7.02 ATC 24.6"), Err(Reason::NoMatch));
}

#[test]
fn a_line_whose_checksum_is_wrong_gives_nothing() {
    let checked = decoder(
        r"(?<mv>-?\d+\.\d+),(?<temp_c>\d+\.\d+)",
        1.0,
        Some(Checksum::Xor),
        &[],
    );
    let text = b"-12.1,18.0";
    let xor = text.iter().fold(0, |all, b| all ^ b);
    assert_eq!(
        figures(&checked, format!("-12.1,18.0*{xor:02X}").as_bytes()),
        numbers(-12.1, 18.0)
    );
    assert_eq!(
        figures(&checked, format!("-12.7,18.0*{xor:02X}").as_bytes()),
        Err(Reason::Checksum)
    );
    assert_eq!(figures(&checked, text), Err(Reason::Checksum));
}

proptest! {
    #[test]
    fn junk_breaks_nothing_and_gives_only_finite_figures(line in proptest::collection::vec(any::<u8>(), 0..300)) {
        for decoder in [
            decoder(PLAIN, 1.0, None, &["----", "OL"]),
            decoder(r"(?<mv>.*)(?<temp_c>\d*)", 0.1, Some(Checksum::Sum8), &["-"]),
            decoder(r"(?<mv>[^\d]*\d+)", 1e300, None, &["9", "\u{b0}"]),
        ] {
            if let Ok(sample) = decoder.decode(&line) {
                for figure in sample.figures.into_iter().flatten() {
                    if let Figure::Number(number) = figure {
                        prop_assert!(number.is_finite());
                    }
                }
            }
        }
    }

    #[test]
    fn a_printed_pair_is_read_back(mv in -2000_i32..2000, temp in -50_i32..1500, comma in any::<bool>()) {
        let (mv, temp) = (f64::from(mv) / 10.0, f64::from(temp) / 10.0);
        let text = format!("{mv:+07.1} mV  {temp:.1} C");
        let text = if comma { text.replace('.', ",") } else { text };
        prop_assert_eq!(figures(&decoder(PLAIN, 1.0, None, &["OL"]), text.as_bytes()), numbers(mv, temp));
    }
}
