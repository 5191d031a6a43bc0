//! # `alarm`, `water` and `effluent` of a point: limits that can be kept

use super::meter::{KnownMeter, signal_of};
use super::or;
use super::point::Scale;
use crate::config::keys;
use crate::config::problem::Problems;
use crate::config::raw::{Table, Value};
use crate::config::site::{Alarm, Effluent, Sides, Water};
use std::time::Duration;

/// Minutes of a month that an effluent may spend outside its band. Source: 40 CFR 401.17(a)(1), 7 h 26 min, from memory.
const TOTAL_MINUTES: f64 = 446.0;
/// Minutes one excursion may last. Source: 40 CFR 401.17(a)(2), from memory.
const SINGLE_MINUTES: f64 = 60.0;
/// On- and off-delay where none is given: common practice, no source.
const ON_DELAY: Duration = Duration::from_mins(1);
const OFF_DELAY: Duration = Duration::from_mins(2);

pub(super) fn alarm(
    value: &Value<'_>,
    scale: &Scale,
    problems: &mut Problems<'_>,
) -> Option<Alarm> {
    let table = value.table(&keys::ALARM, problems)?;
    let limits = ["low_low", "low", "high", "high_high"].map(|key| {
        let value = table.find(key)?;
        let figure = value.number_in(&scale.limits, scale.unit, problems)?;
        Some((figure, value))
    });
    let deadband = or(&table, "deadband", scale.deadband, |value| {
        value.number_in(&(0.0..=*scale.limits.end()), scale.unit, problems)
    });
    let mut delay = |key, otherwise| {
        or(&table, key, otherwise, |value| {
            value.duration_in(Duration::ZERO..=Duration::from_hours(24), problems)
        })
    };
    let (on_delay, off_delay) = (delay("on_delay", ON_DELAY), delay("off_delay", OFF_DELAY));

    let given = |key| table.find(key).is_some();
    if !["low_low", "low", "high", "high_high"]
        .into_iter()
        .any(given)
    {
        value.refuse(
            problems,
            "an alarm without a limit never rings",
            "add `low`, `high`, `low_low` or `high_high`",
        );
        return None;
    }
    let [low_low, low, high, high_high] = &limits;
    let ordered = in_order(low_low, low, Rank::SameSide, problems)
        & in_order(high, high_high, Rank::SameSide, problems)
        & in_order(
            if low.is_some() { low } else { low_low },
            if high.is_some() { high } else { high_high },
            Rank::Across,
            problems,
        );
    let inner_low = low.as_ref().or(low_low.as_ref());
    let inner_high = high.as_ref().or(high_high.as_ref());
    if ordered
        && let (Some((low, _)), Some((high, at)), Some(deadband)) =
            (inner_low, inner_high, deadband)
        && deadband >= high - low
    {
        let width = rounded(high - low);
        table.find("deadband").as_ref().unwrap_or(at).refuse(
            problems,
            &format!("a deadband of {deadband} leaves nothing of the band from {low} to {high}"),
            &format!("write a deadband well below {width}"),
        );
    }
    let figure = |limit: &Limit<'_>| limit.as_ref().map(|(figure, _)| *figure);
    Some(Alarm {
        low_low: figure(low_low),
        low: figure(low),
        high: figure(high),
        high_high: figure(high_high),
        deadband: deadband?,
        on_delay: on_delay?,
        off_delay: off_delay?,
    })
}

type Limit<'a> = Option<(f64, Value<'a>)>;

/// How two limits must stand to each other.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Rank {
    /// Both low or both high: they may be equal.
    SameSide,
    /// A low and a high one: they may not.
    Across,
}

fn in_order(lower: &Limit<'_>, upper: &Limit<'_>, rank: Rank, problems: &mut Problems<'_>) -> bool {
    let (Some((low, at)), Some((high, other))) = (lower, upper) else {
        return true;
    };
    if low < high || (rank == Rank::SameSide && low <= high) {
        return true;
    }
    let (lower, upper) = (at.key(), other.key());
    at.refuse(
        problems,
        &format!("`{lower}` {low} is not below `{upper}` {high}"),
        &format!("write `{lower}` below {high}, or `{upper}` above {low}"),
    );
    false
}

/// Without the digits that only the binary fraction has.
fn rounded(figure: f64) -> f64 {
    (figure * 1e9).round() / 1e9
}

pub(super) fn water(value: &Value<'_>, problems: &mut Problems<'_>) -> Option<Water> {
    let table = value.table(&keys::WATER, problems)?;
    let salinity = or(&table, "salinity", 0.0, |value| {
        value.number_in(&(0.0..=50.0), "g/kg", problems)
    });
    let mut amount = |key, highest, unit| {
        or(&table, key, None, |value| {
            value.number_in(&(0.0..=highest), unit, problems).map(Some)
        })
    };
    let alkalinity = amount("alkalinity_meq_l", 100.0, "meq/L");
    let ammonia = amount("total_ammonia_mg_l", 1_000.0, "mg/L");
    Some(Water {
        salinity: salinity?,
        alkalinity_meq_l: alkalinity?,
        total_ammonia_mg_l: ammonia?,
    })
}

pub(super) fn effluent(
    value: &Value<'_>,
    scale: &Scale,
    meters: &[KnownMeter],
    problems: &mut Problems<'_>,
) -> Option<Effluent> {
    let table = value.table(&keys::EFFLUENT, problems)?;
    let limits = ["low", "high"].map(|key| {
        let value = table.need(key, problems)?;
        let figure = value.number_in(&scale.limits, scale.unit, problems)?;
        Some((figure, value))
    });
    let [low, high] = &limits;
    in_order(low, high, Rank::Across, problems);
    let mut minutes = |key, otherwise| {
        or(&table, key, otherwise, |value| {
            value.number_in(&(0.0..=44_640.0), "min", problems)
        })
    };
    let total = minutes("total_minutes", TOTAL_MINUTES);
    let single = minutes("single_minutes", SINGLE_MINUTES);
    let sides = or(&table, "sides", Sides::Both, |value| value.word(problems));
    let above = or(&table, "flow_above", 0.0, |value| value.number(problems));
    let flow = or(&table, "flow", None, |value| {
        let signal = signal_of(&value, meters, problems)?;
        Some(Some((signal, above?)))
    });
    if let (Some(above), None) = (table.find("flow_above"), table.find("flow")) {
        problems.add(
            &above.key_span,
            &above.path,
            "`flow_above` says nothing without `flow`",
            &format!(
                "add `flow = {}`, or remove it",
                keys::EFFLUENT.example("flow")
            ),
        );
    }
    let figure = |limit: &Limit<'_>| limit.as_ref().map(|(figure, _)| *figure);
    Some(Effluent {
        low: figure(low)?,
        high: figure(high)?,
        total_minutes: total?,
        single_minutes: single?,
        sides: sides?,
        flow: flow?,
    })
}

/// Refuses a key whose meaning rests on pH at a point that measures something else.
pub(super) fn refuse_beside_orp(table: &Table<'_>, problems: &mut Problems<'_>) {
    for key in ["water", "effluent"] {
        if let Some(value) = table.find(key) {
            problems.add(
                &value.key_span,
                &value.path,
                &format!("`{key}` is about pH, and this point measures orp"),
                "remove it, or move it to the pH point in the same liquid",
            );
        }
    }
}
