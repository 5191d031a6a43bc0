//! # `[[meter]]`

use super::line::KnownLine;
use super::signal::{modbus_signals, text_signals};
use super::{Once, or};
use crate::config::keys;
use crate::config::near::instead_of;
use crate::config::problem::Problems;
use crate::config::raw::{Table, Value, quoted};
use crate::config::site::{Meter, Protocol, Signal, SignalRef, Source, TextShape};
use std::time::Duration;

/// What is known of a meter, even when it is faulty.
#[derive(Debug)]
pub(super) struct KnownMeter {
    pub(super) name: Option<String>,
    /// `None` when what it gives is not known for a fault in it.
    pub(super) signals: Option<Vec<Signal>>,
    pub(super) meter: Option<Meter>,
}

pub(super) fn meters(
    tables: &[Table<'_>],
    lines: &[KnownLine],
    problems: &mut Problems<'_>,
) -> Vec<KnownMeter> {
    let (mut names, mut seats) = (Once::default(), Once::default());
    let mut meters = Vec::new();
    for table in tables {
        let name = table.need("name", problems).and_then(|value| {
            let name = value.name(problems)?;
            names.take(name, &value, "give this meter a name of its own", problems);
            Some(name.to_owned())
        });
        let line = table
            .need("line", problems)
            .and_then(|value| line_of(&value, lines, problems));
        let protocol = line.and_then(|line| lines.get(line)?.protocol);
        let mut source = None;
        let mut signals = None;
        if let (Some(line), Some(protocol)) = (line, protocol) {
            refuse_foreign(table, protocol, &lines[line], problems);
            signals = match protocol {
                Protocol::ModbusRtu => modbus_signals(table, problems),
                Protocol::Query | Protocol::Stream => text_signals(table, problems),
            };
            source = source_of(table, protocol, problems);
            refuse_shared(table, line, protocol, &mut seats, problems);
        }
        let meter = || {
            Some(Meter {
                name: name.clone()?,
                line: line?,
                source: source?,
                signals: signals.clone()?,
            })
        };
        let meter = meter();
        meters.push(KnownMeter {
            name,
            signals,
            meter,
        });
    }
    meters
}

/// The signal a text such as `pond-3.mv` names.
pub(super) fn signal_of(
    value: &Value<'_>,
    meters: &[KnownMeter],
    problems: &mut Problems<'_>,
) -> Option<SignalRef> {
    let text = value.text(problems)?;
    let Some((meter_name, signal_name)) = text.rsplit_once('.') else {
        value.refuse(
            problems,
            &format!("`{text}` names no signal of a meter"),
            &format!(
                "write meter and signal with a point between, {}",
                value.like().trim_start_matches("write ")
            ),
        );
        return None;
    };
    let Some((index, meter)) = meters
        .iter()
        .enumerate()
        .find(|(_, meter)| meter.name.as_deref() == Some(meter_name))
    else {
        if meters.iter().all(|meter| meter.name.is_some()) {
            let names = meters.iter().filter_map(|meter| meter.name.as_deref());
            value.refuse(
                problems,
                &format!("no meter is called `{meter_name}`"),
                &instead_of(meter_name, names),
            );
        }
        return None;
    };
    let signals = meter.signals.as_ref()?;
    let signal = signals.iter().position(|signal| signal.name == signal_name);
    if signal.is_none() {
        let names = signals.iter().map(|signal| signal.name.as_str());
        value.refuse(
            problems,
            &format!("meter `{meter_name}` has no signal `{signal_name}`"),
            &instead_of(signal_name, names),
        );
    }
    Some(SignalRef {
        meter: index,
        signal: signal?,
    })
}

fn line_of(value: &Value<'_>, lines: &[KnownLine], problems: &mut Problems<'_>) -> Option<usize> {
    let name = value.text(problems)?;
    let line = lines
        .iter()
        .position(|line| line.name.as_deref() == Some(name));
    // A line whose own name is faulty may be the one that is meant.
    if line.is_none() && lines.iter().all(|line| line.name.is_some()) {
        let names = lines.iter().filter_map(|line| line.name.as_deref());
        value.refuse(
            problems,
            &format!("no line is called `{name}`"),
            &instead_of(name, names),
        );
    }
    line
}

/// Refuses keys that belong to a meter of another protocol.
fn refuse_foreign(
    table: &Table<'_>,
    protocol: Protocol,
    line: &KnownLine,
    problems: &mut Problems<'_>,
) {
    for value in table.values() {
        let Some((key, speakers)) = keys::METER_KEYS_OF
            .iter()
            .find(|(key, _)| *key == value.key())
        else {
            continue;
        };
        if !speakers.contains(&protocol) {
            let speakers: Vec<&str> = speakers.iter().map(|protocol| protocol.name()).collect();
            let line = line.name.as_deref().unwrap_or("");
            problems.add(
                &value.key_span,
                &value.path,
                &format!("`{key}` has no place in a meter on a {protocol} line"),
                &format!(
                    "remove it; if the meter speaks {}, say so in `protocol` of line `{line}`",
                    speakers.join(" or ")
                ),
            );
        }
    }
}

/// Refuses a second meter at the same place of a line: the same unit, the same question, the same pattern.
fn refuse_shared(
    table: &Table<'_>,
    line: usize,
    protocol: Protocol,
    seats: &mut Once,
    problems: &mut Problems<'_>,
) {
    let text = |key| table.find(key).and_then(|value| value.as_text());
    let (key, seat) = match protocol {
        Protocol::ModbusRtu => {
            let unit = table.find("unit").and_then(|value| value.as_whole());
            ("unit", unit.map(|unit| format!("unit {unit}")))
        }
        Protocol::Query => {
            let both = text("ask").zip(text("pattern"));
            ("ask", both.map(|(ask, pattern)| format!("{ask} {pattern}")))
        }
        Protocol::Stream => ("pattern", text("pattern").map(str::to_owned)),
    };
    if let (Some(seat), Some(value)) = (seat, table.find(key)) {
        seats.take(&format!("{line} {seat}"), &value, SHARED, problems);
    }
}

const SHARED: &str = "two meters on one line must differ in this, or each would take the other's figures for its own";

fn source_of(table: &Table<'_>, protocol: Protocol, problems: &mut Problems<'_>) -> Option<Source> {
    match protocol {
        Protocol::ModbusRtu => {
            let unit = table.need("unit", problems);
            let unit = unit.and_then(|value| value.whole_in(1..=247, problems));
            let (every, timeout) = pace(table, problems);
            Some(Source::Modbus {
                unit: unit?,
                every: every?,
                timeout: timeout?,
            })
        }
        Protocol::Query => {
            let ask = table.need("ask", problems);
            let ask = ask.and_then(|value| wire_bytes(&value, problems));
            let (every, timeout) = pace(table, problems);
            let text = text_shape(table, problems);
            Some(Source::Query {
                ask: ask?,
                every: every?,
                timeout: timeout?,
                text: text?,
            })
        }
        Protocol::Stream => Some(Source::Stream {
            text: text_shape(table, problems)?,
        }),
    }
}

/// How often a meter is asked and how long its answer may take.
fn pace(table: &Table<'_>, problems: &mut Problems<'_>) -> (Option<Duration>, Option<Duration>) {
    let every = or(table, "every", Duration::from_secs(1), |value| {
        value.duration_in(
            Duration::from_millis(100)..=Duration::from_hours(24),
            problems,
        )
    });
    let timeout = or(table, "timeout", Duration::from_millis(500), |value| {
        value.duration_in(Duration::from_millis(10)..=Duration::from_mins(1), problems)
    });
    (every, timeout)
}

/// Everything of a text meter but the pattern's signals.
fn text_shape(table: &Table<'_>, problems: &mut Problems<'_>) -> Option<TextShape> {
    // That it is there and compiles was said where its groups became signals.
    let pattern = table.find("pattern").and_then(|value| value.as_text());
    let terminator = or(table, "terminator", None, |value| {
        wire_bytes(&value, problems).map(Some)
    });
    let checksum = or(table, "checksum", None, |value| {
        value.word(problems).map(Some)
    });
    let over_range = or(table, "over_range", Vec::new(), |value| {
        let texts = value.texts(problems)?;
        Some(texts.iter().map(|(text, _)| (*text).to_owned()).collect())
    });
    Some(TextShape {
        pattern: pattern?.to_owned(),
        terminator: terminator?,
        checksum: checksum?,
        over_range: over_range?,
    })
}

/// The bytes a text stands for, with `\r \n \t \0 \\ \xNN` also where the file had it between single quotes.
fn wire_bytes(value: &Value<'_>, problems: &mut Problems<'_>) -> Option<Vec<u8>> {
    let text = value.text(problems)?;
    match unescaped(text) {
        Ok(bytes) if !bytes.is_empty() => return Some(bytes),
        Ok(_) => value.refuse(
            problems,
            &format!("`{}` is empty", value.key()),
            &value.like(),
        ),
        Err(bad) => value.refuse(
            problems,
            &format!("`{bad}` stands for no byte"),
            &format!(
                "write plain ASCII and {}",
                quoted(&["\\r", "\\n", "\\t", "\\0", "\\\\", "\\x02"])
            ),
        ),
    }
    None
}

fn unescaped(text: &str) -> Result<Vec<u8>, String> {
    let mut bytes = Vec::new();
    let mut rest = text.chars();
    while let Some(c) = rest.next() {
        if c != '\\' {
            bytes.push(u8::try_from(c).map_err(|_| c.to_string())?);
            continue;
        }
        match rest.next() {
            Some('r') => bytes.push(b'\r'),
            Some('n') => bytes.push(b'\n'),
            Some('t') => bytes.push(b'\t'),
            Some('0') => bytes.push(0),
            Some('\\') => bytes.push(b'\\'),
            Some('x') => {
                let digits: String = rest.by_ref().take(2).collect();
                let plain = digits.len() == 2 && digits.bytes().all(|b| b.is_ascii_hexdigit());
                let byte = u8::from_str_radix(&digits, 16).ok().filter(|_| plain);
                bytes.push(byte.ok_or_else(|| format!("\\x{digits}"))?);
            }
            other => return Err(format!("\\{}", other.map_or(String::new(), String::from))),
        }
    }
    Ok(bytes)
}
