//! # `temperature` of a point

use super::meter::{KnownMeter, signal_of};
use crate::config::keys;
use crate::config::problem::Problems;
use crate::config::raw::{Table, Value};
use crate::config::site::{Sensor, Temperature};
use std::ops::RangeInclusive;

/// Liquids that an electrode stands in, °C.
const LIQUID_C: RangeInclusive<f64> = -10.0..=150.0;

const SHAPES: &str = "write `\"meter.temp_c\"`, `{ signal = \"meter.temp_c\", fallback = 20.0 }`, `{ ohms = \"meter.ohms\", sensor = \"pt1000\" }` or `{ fixed = 25.0 }`";

pub(super) fn temperature(
    point: &Table<'_>,
    meters: &[KnownMeter],
    problems: &mut Problems<'_>,
) -> Option<Temperature> {
    let value = point.need("temperature", problems)?;
    if value.as_text().is_some() {
        return Some(Temperature::Signal {
            signal: signal_of(&value, meters, problems)?,
            fallback_c: None,
        });
    }
    if !value.is_table() {
        value.refuse(problems, "this is no temperature", SHAPES);
        return None;
    }
    let table = value.table(&keys::TEMPERATURE, problems)?;
    let figure = |key, problems: &mut Problems<'_>| match table.find(key) {
        Some(value) => value.number_in(&LIQUID_C, "°C", problems).map(Some),
        None => Some(None),
    };
    let fixed = figure("fixed", problems);
    let fallback = figure("fallback", problems);
    let sensor: Option<Option<Sensor>> = match table.find("sensor") {
        Some(value) => value.word(problems).map(Some),
        None => Some(None),
    };
    let signal = match (table.find("signal"), table.find("ohms")) {
        (Some(_), Some(ohms)) => {
            refuse_key(&ohms, "`signal` names the sensor already", problems);
            return None;
        }
        (Some(signal), None) => Some((signal, false)),
        (None, Some(ohms)) => Some((ohms, true)),
        (None, None) => None,
    };
    let Some((signal, in_ohms)) = signal else {
        for key in ["sensor", "fallback"] {
            if let Some(value) = table.find(key) {
                refuse_key(&value, &format!("`{key}` goes with a signal"), problems);
            }
        }
        if table.find("fixed").is_none() {
            value.refuse(problems, "this says no temperature", SHAPES);
        }
        return fixed?.map(Temperature::Fixed);
    };
    if let Some(fixed) = table.find("fixed") {
        refuse_key(
            &fixed,
            "a temperature is fixed or comes from a signal, not both",
            problems,
        );
    }
    let signal = signal_of(&signal, meters, problems);
    match sensor? {
        Some(sensor) => Some(Temperature::Resistance {
            signal: signal?,
            sensor,
            fallback_c: fallback?,
        }),
        None if in_ohms => {
            table.lacks("sensor", problems);
            None
        }
        None => Some(Temperature::Signal {
            signal: signal?,
            fallback_c: fallback?,
        }),
    }
}

fn refuse_key(value: &Value<'_>, problem: &str, problems: &mut Problems<'_>) {
    problems.add(&value.key_span, &value.path, problem, SHAPES);
}
