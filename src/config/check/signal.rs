//! # `[meter.signals]`, and the signals a pattern names

use super::or;
use crate::config::keys;
use crate::config::near::instead_of;
use crate::config::problem::Problems;
use crate::config::raw::{Table, Value};
use crate::config::site::{Layout, OWN_TIME, Register, Signal, WordOrder};
use regex_lite::Regex;

const GROUPS: &str = "name each figure's group: '(?<mv>[-+]?\\d+[.,]\\d+)\\s*mV'";

/// The signals of a Modbus meter: each a register.
pub(super) fn modbus_signals(
    meter: &Table<'_>,
    problems: &mut Problems<'_>,
) -> Option<Vec<Signal>> {
    let value = meter.need("signals", problems)?;
    let table = value.open_table(&keys::SIGNAL, problems)?;
    let mut signals = Some(Vec::new());
    for value in table.values() {
        let signal = named(&value, problems).and_then(|name| {
            let table = value.table(&keys::SIGNAL, problems)?;
            let register = register(&table, problems);
            let scale = scale(&table, problems);
            Some(Signal {
                name,
                scale: scale?,
                register: Some(register?),
            })
        });
        signals = signals.zip(signal).map(|(mut all, one)| {
            all.push(one);
            all
        });
    }
    if signals.as_ref().is_some_and(Vec::is_empty) {
        value.refuse(
            problems,
            "this meter gives no signal",
            "add `mv = { register = 0, table = \"input\", type = \"i16\", scale = 0.1 }`",
        );
        return None;
    }
    signals
}

/// The signals of a text meter: the groups of its pattern, in their order, with the factors `[meter.signals]` gives them.
pub(super) fn text_signals(meter: &Table<'_>, problems: &mut Problems<'_>) -> Option<Vec<Signal>> {
    let pattern = meter
        .need("pattern", problems)
        .and_then(|value| groups(&value, problems));
    let factors = match meter.find("signals") {
        Some(value) => factors(&value, pattern.as_deref(), problems),
        None => Some(Vec::new()),
    };
    let factors = factors?;
    let signal = |name: String| {
        let factor = factors.iter().find(|(named, _)| *named == name);
        Signal {
            scale: factor.map_or(1.0, |(_, scale)| *scale),
            register: None,
            name,
        }
    };
    Some(pattern?.into_iter().map(signal).collect())
}

/// The named groups of a pattern, but for the one of the meter's own time.
fn groups(value: &Value<'_>, problems: &mut Problems<'_>) -> Option<Vec<String>> {
    let pattern = value.text(problems)?;
    match Regex::new(pattern) {
        Ok(regex) => {
            let signals = regex.capture_names().flatten();
            let names: Vec<String> = signals
                .filter(|name| *name != OWN_TIME)
                .map(str::to_owned)
                .collect();
            if names.is_empty() {
                value.refuse(problems, "the pattern names no signal", GROUPS);
                return None;
            }
            Some(names)
        }
        Err(error) => {
            value.refuse(
                problems,
                &format!("the pattern cannot be read: {error}"),
                GROUPS,
            );
            None
        }
    }
}

fn factors(
    value: &Value<'_>,
    groups: Option<&[String]>,
    problems: &mut Problems<'_>,
) -> Option<Vec<(String, f64)>> {
    let table = value.open_table(&keys::SIGNAL, problems)?;
    let mut factors = Some(Vec::new());
    for value in table.values() {
        if let Some(groups) = groups
            && !groups.iter().any(|group| group == value.key())
        {
            problems.add(
                &value.key_span,
                &value.path,
                &format!("the pattern has no group `{}`", value.key()),
                &instead_of(value.key(), groups.iter().map(String::as_str)),
            );
        }
        let factor = value.table(&keys::SIGNAL, problems).and_then(|table| {
            for register_key in table.values().filter(|value| value.key() != "scale") {
                problems.add(
                    &register_key.key_span,
                    &register_key.path,
                    &format!("`{}` belongs to a modbus-rtu meter", register_key.key()),
                    "remove it: here the pattern says where the figure stands",
                );
            }
            scale(&table, problems)
        });
        factors = factors.zip(factor).map(|(mut all, one)| {
            all.push((value.key().to_owned(), one));
            all
        });
    }
    factors
}

/// A signal's name: it stands behind a point in `meter.signal`, so it holds none itself.
fn named(value: &Value<'_>, problems: &mut Problems<'_>) -> Option<String> {
    let name = value.key();
    let plain = |c: char| c.is_ascii_alphanumeric() || c == '_' || c == '-';
    if !name.is_empty() && name.chars().all(plain) {
        return Some(name.to_owned());
    }
    problems.add(
        &value.key_span,
        &value.path,
        &format!("`{name}` is no name for a signal"),
        "write letters, digits, `_` and `-` only, such as `mv` or `temp_c`",
    );
    None
}

fn scale(table: &Table<'_>, problems: &mut Problems<'_>) -> Option<f64> {
    or(table, "scale", 1.0, |value| {
        let scale = value.number(problems)?;
        if scale.abs() > 0.0 {
            return Some(scale);
        }
        value.refuse(
            problems,
            "a scale of 0 makes every figure 0",
            "write the factor from the meter's figure to the unit, such as `0.1`; `-1.0` sets a reversed sign right",
        );
        None
    })
}

fn register(table: &Table<'_>, problems: &mut Problems<'_>) -> Option<Register> {
    let layout: Option<Layout> = table
        .need("type", problems)
        .and_then(|value| value.word(problems));
    let pair = layout.map(|layout| match layout {
        Layout::I16 | Layout::U16 => false,
        Layout::I32 | Layout::U32 | Layout::F32 => true,
    });
    let address = table.need("register", problems).and_then(|value| {
        let address: u16 = value.whole_in(0..=u16::MAX, problems)?;
        if pair == Some(true) && address == u16::MAX {
            value.refuse(
                problems,
                "a value of two registers cannot begin at the last, 65535",
                "write the address of its first register, at most 65534",
            );
        }
        Some(address)
    });
    let bank = table
        .need("table", problems)
        .and_then(|value| value.word(problems));
    let word_order = or(table, "word_order", WordOrder::Big, |value| {
        if let (Some(false), Some(layout)) = (pair, layout) {
            problems.add(
                &value.key_span,
                &value.path,
                &format!("{layout} is one register and has no word order"),
                "remove it, or write a type of two registers: `i32`, `u32`, `f32`",
            );
        }
        value.word(problems)
    });
    Some(Register {
        address: address?,
        table: bank?,
        layout: layout?,
        word_order: word_order?,
    })
}
