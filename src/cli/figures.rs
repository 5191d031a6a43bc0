//! # How figures look to people: never without unit, rounded to what their uncertainty carries

use crate::electrode::history::{ElectrodeLine, ProbeKind, StandardReading};
use crate::electrode::slope::nernst_slope;
use crate::electrode::units::{Celsius, Timestamp};
use comfy_table::{CellAlignment, ColumnConstraint, ContentArrangement, Table, Width};
use std::time::Duration;

/// What stands where there is nothing to say.
pub(super) const NOTHING: &str = "-";

/// The unit of a value.
pub(super) const fn unit(kind: ProbeKind) -> &'static str {
    match kind {
        ProbeKind::Ph => "pH",
        ProbeKind::Orp => "mV",
    }
}

/// Decimals at which `u` keeps two digits, or one when its first digit is 4 or more: rounding then moves it by 13 % at most.
fn decimals(u: f64) -> usize {
    if !(1e-6..1e6).contains(&u) {
        return 2;
    }
    let magnitude = u.log10().floor();
    let first = u / 10_f64.powf(magnitude);
    let wanted = if first < 3.95 { 1.0 } else { 0.0 } - magnitude;
    (0..7)
        .find(|places| f64::from(*places) >= wanted)
        .map_or(6, |places: u8| usize::from(places))
}

/// `7.42 ± 0.04 pH`.
pub(super) fn with_u(value: f64, u: f64, unit: &str) -> String {
    let places = decimals(u);
    format!("{value:.places$} ± {u:.places$} {unit}")
}

/// A value of a probe's kind whose u may be missing.
pub(super) fn value(kind: ProbeKind, value: f64, u: Option<f64>) -> String {
    match u {
        Some(u) => with_u(value, u, unit(kind)),
        None => format!("{} ± unknown", plain(kind, value)),
    }
}

/// A value or a difference that stands beside its u elsewhere.
pub(super) fn plain(kind: ProbeKind, value: f64) -> String {
    match kind {
        ProbeKind::Ph => format!("{value:.2} pH"),
        ProbeKind::Orp => format!("{value:.1} mV"),
    }
}

/// A difference with its sign.
pub(super) fn signed(kind: ProbeKind, value: f64) -> String {
    match kind {
        ProbeKind::Ph => format!("{} pH", with_sign(value, 3)),
        ProbeKind::Orp => format!("{} mV", with_sign(value, 1)),
    }
}

/// A figure with its sign; what rounds to nothing has a plus.
pub(super) fn with_sign(figure: f64, places: usize) -> String {
    let text = format!("{figure:+.places$}");
    if text.bytes().any(|byte| (b'1'..=b'9').contains(&byte)) {
        text
    } else {
        text.replace('-', "+")
    }
}

/// Header of the columns of [`reading`].
pub(super) const READING: [&str; 4] = ["BUFFER", "VALUE", "MV", "TEMP"];

/// A settled reading in a standard as cells: what it was in, its value ± u, mV, °C.
pub(super) fn reading(kind: ProbeKind, reading: &StandardReading) -> Vec<String> {
    let name = match &reading.lot {
        Some(lot) => format!("{} (lot {lot})", reading.name),
        None => reading.name.clone(),
    };
    vec![
        name,
        with_u(reading.value, 2.0 * reading.u_value, unit(kind)),
        format!("{:.1} mV", reading.mv),
        format!("{:.1} °C", reading.temp_c),
    ]
}

/// Theoretical slope at 25 °C, mV/pH, at which slopes are quoted.
pub(super) const K_25C: f64 = nernst_slope(Celsius::STANDARD).mv_per_ph();

/// Theoretical slope at a temperature, mV/pH; at 25 °C where the figure is no temperature.
pub(super) fn k(temp_c: f64) -> f64 {
    Celsius::new(temp_c).map_or(K_25C, |t| nernst_slope(t).mv_per_ph())
}

/// `98.2 % ± 0.4 % (58.09 ± 0.24 mV/pH at 25 °C)`.
pub(super) fn slope(line: &ElectrodeLine) -> String {
    let u = 2.0 * line.var_slope.sqrt();
    format!(
        "{} ({} at 25 °C)",
        with_u(100.0 * line.slope, 100.0 * u, "%"),
        with_u(K_25C * line.slope, K_25C * u, "mV/pH")
    )
}

/// `-12.3 ± 0.6 mV`.
pub(super) fn offset(line: &ElectrodeLine) -> String {
    with_u(line.offset_mv, 2.0 * line.var_offset_mv2.sqrt(), "mV")
}

/// An age in the unit one would say it in: `40 s`, `12 min`, `5 h`, `23 days`.
pub(super) fn age(from: Timestamp, to: Timestamp) -> String {
    let seconds = to.ms().saturating_sub(from.ms()) / 1000;
    match seconds {
        ..120 => format!("{seconds} s"),
        120..7_200 => format!("{} min", seconds / 60),
        7_200..172_800 => format!("{} h", seconds / 3_600),
        _ => format!("{} days", seconds / 86_400),
    }
}

/// A length of time as milliseconds.
pub(super) fn ms(length: Duration) -> i64 {
    i64::try_from(length.as_millis()).unwrap_or(i64::MAX)
}

/// Facts under a heading, one a line, their words in a column.
pub(super) fn facts(facts: &[(&str, String)]) -> String {
    let width = facts.iter().map(|(word, _)| word.len()).max().unwrap_or(0);
    let lines: Vec<String> = facts
        .iter()
        .map(|(word, said)| format!("  {word:<width$}  {said}\n"))
        .collect();
    lines.concat()
}

/// How wide the terminal is that reads standard output, if one does.
pub(super) fn terminal_columns() -> Option<u16> {
    let size = rustix::termios::tcgetwinsize(std::io::stdout()).ok()?;
    (size.ws_col > 0).then_some(size.ws_col)
}

/// A table in the house's look: bare columns, two spaces between; `right` names the columns of figures.
pub(super) fn table(header: &[&str], rows: Vec<Vec<String>>, right: &[usize]) -> String {
    let longest_word = |place: usize| {
        let cells = rows
            .iter()
            .filter_map(|row| row.get(place).map(String::as_str));
        let words = cells
            .chain(header.get(place).copied())
            .flat_map(str::split_whitespace);
        words.map(|word| word.chars().count()).max().unwrap_or(0)
    };
    let longest_words: Vec<usize> = (0..header.len()).map(longest_word).collect();
    let mut table = Table::new();
    table.load_style(comfy_table::presets::NOTHING);
    table.set_header(header.iter().copied());
    table.add_rows(rows);
    // On a terminal narrower than the table, cells break between words inside their column instead of across the line.
    if let Some(columns) = terminal_columns() {
        table.set_content_arrangement(ContentArrangement::Dynamic);
        table.set_width(columns);
    }
    let last = header.len().saturating_sub(1);
    for ((place, column), longest_word) in table.column_iter_mut().enumerate().zip(longest_words) {
        let padding = if place == last { 0 } else { 2 };
        column.set_padding((0, padding));
        let narrowest = u16::try_from(longest_word)
            .unwrap_or(u16::MAX)
            .saturating_add(padding);
        column.set_constraint(ColumnConstraint::LowerBoundary(Width::Fixed(narrowest)));
        if right.contains(&place) {
            column.set_cell_alignment(CellAlignment::Right);
        }
    }
    let mut text = table.trim_fmt();
    text.push('\n');
    text
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_value_is_rounded_to_what_its_uncertainty_carries() {
        for (figure, u, expected) in [
            (7.4213, 0.0402, "7.42 ± 0.04 pH"),
            (7.4213, 0.0234, "7.421 ± 0.023 pH"),
            (7.4213, 0.1449, "7.42 ± 0.14 pH"),
            (7.4213, 0.4449, "7.4 ± 0.4 pH"),
            (7.0, 12.3, "7 ± 12 pH"),
            (4.005, 0.005, "4.005 ± 0.005 pH"),
            (4.005, 0.0, "4.00 ± 0.00 pH"),
        ] {
            assert_eq!(with_u(figure, u, "pH"), expected);
        }
    }

    #[test]
    fn rounding_never_changes_an_uncertainty_by_more_than_an_eighth() {
        for n in 1..20_000 {
            let u = f64::from(n) * 1e-3;
            let shown: f64 = format!("{u:.*}", decimals(u)).parse().unwrap();
            assert!((shown / u - 1.0).abs() <= 0.127, "{u} shown as {shown}");
        }
    }

    #[test]
    fn a_difference_that_rounds_to_nothing_is_not_negative() {
        assert_eq!(signed(ProbeKind::Ph, -0.0004), "+0.000 pH");
        assert_eq!(signed(ProbeKind::Orp, -12.34), "-12.3 mV");
    }

    #[test]
    fn an_age_is_told_in_the_unit_one_would_say() {
        for (seconds, expected) in [
            (3, "3 s"),
            (119, "119 s"),
            (600, "10 min"),
            (10_000, "2 h"),
            (2_000_000, "23 days"),
        ] {
            let zero = Timestamp::from_ms(0);
            assert_eq!(age(zero, zero.plus_ms(seconds * 1000)), expected);
        }
    }

    #[test]
    fn a_table_has_no_frame_and_no_trailing_spaces() {
        let rows = vec![
            vec!["A".into(), "7.0".into()],
            vec!["BB".into(), "10.25".into()],
        ];
        assert_eq!(
            table(&["POINT", "VALUE"], rows, &[1]),
            "POINT  VALUE\nA        7.0\nBB     10.25\n"
        );
    }
}
