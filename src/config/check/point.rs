//! # `[[point]]`

use super::band::{alarm, effluent, refuse_beside_orp, water};
use super::meter::{KnownMeter, signal_of};
use super::temperature::temperature;
use super::{Once, or};
use crate::config::near::instead_of;
use crate::config::problem::Problems;
use crate::config::raw::Table;
use crate::config::site::Point;
use crate::electrode::history::{ProbeKind, Tag};
use std::ops::RangeInclusive;
use std::time::Duration;

/// What figures of a quantity can be, and what stands where none is given.
#[derive(Debug)]
pub(super) struct Scale {
    pub(super) unit: &'static str,
    pub(super) limits: RangeInclusive<f64>,
    pub(super) deadband: f64,
    smallest_tolerance: f64,
    widest: f64,
    junction: f64,
}

const PH: Scale = Scale {
    unit: "pH",
    limits: -2.0..=16.0,
    deadband: 0.1,
    smallest_tolerance: 0.001,
    widest: 5.0,
    junction: 0.01,
};

const ORP: Scale = Scale {
    unit: "mV",
    limits: -2_000.0..=2_000.0,
    deadband: 10.0,
    smallest_tolerance: 0.1,
    widest: 500.0,
    junction: 2.0,
};

/// Standard uncertainty of a temperature where none is given, °C.
const TEMPERATURE_U: f64 = 0.2;

struct KnownTag {
    tag: Option<String>,
    quantity: Option<ProbeKind>,
}

pub(super) fn points(
    tables: &[Table<'_>],
    meters: &[KnownMeter],
    problems: &mut Problems<'_>,
) -> Option<Vec<Point>> {
    let mut once = Once::default();
    let mut known = Vec::new();
    for table in tables {
        let tag = table.need("tag", problems).and_then(|value| {
            let tag = value.name(problems)?;
            once.take(tag, &value, "give this point a tag of its own", problems);
            Some(tag.to_owned())
        });
        let quantity = table
            .need("quantity", problems)
            .and_then(|value| value.word(problems));
        known.push(KnownTag { tag, quantity });
    }
    let mut points = Vec::new();
    for (index, table) in tables.iter().enumerate() {
        points.push(point(table, index, &known, meters, problems));
    }
    let mut points = points.into_iter().collect::<Option<Vec<Point>>>()?;
    make_mutual(&mut points);
    Some(points)
}

/// Who shares a liquid with another shares it whoever of the two said so.
fn make_mutual(points: &mut [Point]) {
    let said: Vec<(usize, usize)> = points
        .iter()
        .enumerate()
        .flat_map(|(a, point)| point.redundant_with.iter().map(move |b| (a, *b)))
        .collect();
    for (a, b) in said {
        if let Some(other) = points.get_mut(b)
            && !other.redundant_with.contains(&a)
        {
            other.redundant_with.push(a);
            other.redundant_with.sort_unstable();
        }
    }
}

fn point(
    table: &Table<'_>,
    index: usize,
    known: &[KnownTag],
    meters: &[KnownMeter],
    problems: &mut Problems<'_>,
) -> Option<Point> {
    let own = known.get(index)?;
    let signal = table
        .need("signal", problems)
        .and_then(|value| signal_of(&value, meters, problems));
    let temperature = temperature(table, meters, problems);
    let every = or(table, "every", Duration::from_secs(1), |value| {
        value.duration_in(
            Duration::from_millis(100)..=Duration::from_hours(24),
            problems,
        )
    });
    let redundant_with = or(table, "redundant_with", Vec::new(), |value| {
        let named = value.texts(problems)?;
        let others = named
            .into_iter()
            .map(|(tag, at)| other_point(tag, &at, index, known, problems));
        others.collect::<Vec<_>>().into_iter().collect()
    });
    let u_temp_c = or(table, "temperature_u", TEMPERATURE_U, |value| {
        value.number_in(&(0.0..=20.0), "°C", problems)
    });
    let quantity = own.quantity?;
    let scale = match quantity {
        ProbeKind::Ph => &PH,
        ProbeKind::Orp => &ORP,
    };
    let tolerance = table.need("tolerance", problems).and_then(|value| {
        value.number_in(
            &(scale.smallest_tolerance..=scale.widest),
            scale.unit,
            problems,
        )
    });
    let u_junction = or(table, "junction", scale.junction, |value| {
        value.number_in(&(0.0..=scale.widest), scale.unit, problems)
    });
    let alarm = or(table, "alarm", None, |value| {
        alarm(&value, scale, problems).map(Some)
    });
    if quantity == ProbeKind::Orp {
        refuse_beside_orp(table, problems);
    }
    let water = or(table, "water", None, |value| {
        water(&value, problems).map(Some)
    });
    let effluent = or(table, "effluent", None, |value| {
        effluent(&value, scale, meters, problems).map(Some)
    });
    Some(Point {
        tag: Tag(own.tag.clone()?),
        quantity,
        signal: signal?,
        temperature: temperature?,
        every: every?,
        tolerance: tolerance?,
        u_junction: u_junction?,
        u_temp_c: u_temp_c?,
        alarm: alarm?,
        redundant_with: redundant_with?,
        water: water?,
        effluent: effluent?,
    })
}

fn other_point(
    tag: &str,
    at: &crate::config::raw::Value<'_>,
    index: usize,
    known: &[KnownTag],
    problems: &mut Problems<'_>,
) -> Option<usize> {
    let own = known.get(index)?;
    let Some((other, found)) = known
        .iter()
        .enumerate()
        .find(|(_, point)| point.tag.as_deref() == Some(tag))
    else {
        if known.iter().all(|point| point.tag.is_some()) {
            let others = known.iter().filter_map(|point| point.tag.as_deref());
            let others: Vec<&str> = others
                .filter(|other| Some(*other) != own.tag.as_deref())
                .collect();
            at.refuse(
                problems,
                &format!("no point has the tag `{tag}`"),
                &instead_of(tag, others),
            );
        }
        return None;
    };
    if other == index {
        at.refuse(
            problems,
            "a point cannot stand in for itself",
            "name the other points in the same liquid, or remove it",
        );
        return None;
    }
    if let (Some(mine), Some(theirs)) = (own.quantity, found.quantity)
        && mine != theirs
    {
        at.refuse(
            problems,
            &format!("`{tag}` measures {theirs}, this point {mine}"),
            "name points of the same quantity only",
        );
        return None;
    }
    Some(other)
}
