//! # From what arrived to what is reported
//!
//! Order of judging: temperature first (a failed one makes the value fail, never a silent 25 °C), then the millivolts, then
//! who is in the liquid and what calibration is in force, then the value with its uncertainty and its tests.

use super::standing::Standing;
use crate::config::site::{Point, Sensor, Temperature};
use crate::electrode::ageing::u_of_value;
use crate::electrode::convert::{self, Converted, Inputs};
use crate::electrode::history::{Calibration, Dated, ElectrodeLine, ProbeHistory, ProbeKind};
use crate::electrode::slope::nernst_slope;
use crate::electrode::temperature;
use crate::electrode::units::{Celsius, Millivolts, Ohms, Timestamp};
use crate::watch::flags::{Flag, Test, Tests};
use crate::watch::reading::{
    Reading, TemperatureSource, round_mv, round_temp_c, round_u, round_value,
};

/// Standard uncertainty of a logged potential, mV: digit, noise and mixing of an ordinary meter (common practice, no source).
pub const U_MV: f64 = 0.3;

/// Standard uncertainty of a configured temperature that stands in for a failed sensor, °C (ours: a tank drifts several degrees
/// within a day before anybody looks).
pub const U_FALLBACK_C: f64 = 3.0;

/// How far outside the outermost buffers a value may lie before it is called suspect, pH (ours; the growth of u says the rest).
const SPAN_MARGIN_PH: f64 = 1.0;

/// One figure as it arrived.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Figure {
    /// There was none.
    Nothing,
    /// The meter said that it is over range.
    OverRange,
    /// A potential in mV, or a temperature in °C.
    Number(f64),
    /// A temperature sensor's resistance in ohm.
    Resistance(f64),
}

/// What arrived for a point at one moment.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Arrival {
    /// When.
    pub at: Timestamp,
    /// The potential.
    pub mv: Figure,
    /// The temperature.
    pub temperature: Figure,
}

/// Makes a judged reading of what arrived at `point`, under what stood at that moment.
pub fn read(point: &Point, standing: &Standing, arrival: &Arrival) -> Reading {
    let book = standing.book();
    let mut tests = Tests::NONE;
    let mv = usable_mv(arrival.mv, &mut tests);
    let temperature = usable_temperature(point, arrival.temperature);
    // Where nothing came at all there is one thing to say, not two.
    if temperature.usable.is_none() && !tests.has(Test::Gap) {
        tests.mark(Test::Temperature);
    }
    if book.hold_at(&point.tag, arrival.at).is_some() {
        tests.mark(Test::Hold);
    }
    let in_force = book
        .probe_at(&point.tag, arrival.at)
        .and_then(|p| Some((p, p.calibration_at(arrival.at)?)));
    if in_force.is_none() && mv.is_some() {
        tests.mark(Test::NoCalibration);
    }
    let u_junction = point.u_junction;
    let now = |probe: &ProbeHistory| {
        let stretch = standing.stretch(&probe.spec.id, arrival.at)?;
        Some(stretch.line_at(arrival.at))
    };
    let converted = match (mv, in_force, point.quantity) {
        (Some(mv), Some((probe, calibration)), ProbeKind::Ph) => {
            temperature.usable.and_then(|(t, u_temp_c)| {
                let inputs = Inputs {
                    u_mv: U_MV,
                    u_temp_c,
                    u_junction,
                };
                let value = ph(mv, t, (probe, calibration), &inputs, &mut tests)?;
                let best = now(probe)
                    .and_then(|line| convert::to_ph(mv, t, &line, probe.spec.ph_iso, &inputs).ok());
                Some(stated(value, best))
            })
        }
        (Some(mv), Some((probe, calibration)), ProbeKind::Orp) => {
            let inputs = Inputs {
                u_mv: U_MV,
                u_temp_c: point.u_temp_c,
                u_junction,
            };
            let value = orp(mv, &calibration.fact.line, &inputs, &mut tests);
            let best = now(probe).map(|line| convert::to_orp(mv, &line, &inputs));
            Some(stated(value, best))
        }
        _ => None,
    };
    if converted.is_some_and(|c| c.u > point.tolerance) {
        tests.mark(Test::Uncertainty);
    }
    Reading {
        at: arrival.at,
        mv: mv.map(Millivolts::mv),
        temp_c: temperature.shown,
        value: converted.map(|c| round_value(point.quantity, c.value)),
        u: converted.map(|c| round_u(c.u)),
        calibration: in_force.map(|(_, c)| c.id),
        flag: roll_up(point.quantity, tests),
        tests,
        temperature_source: temperature.source,
    }
}

/// The value with the u its electrode's history gives it: it grows with age, and where the history says otherwise than the calibration.
fn stated(value: Converted, best: Option<Converted>) -> Converted {
    let u = best.map_or(value.u, |best| u_of_value(value.value, &best));
    Converted { u, ..value }
}

/// The worst of the tests, on the flag's scale: fail over suspect over not evaluated over pass.
///
/// An ORP against its own reference does not need a temperature, so there a failed one makes the reading suspect and not fail.
pub fn roll_up(quantity: ProbeKind, tests: Tests) -> Flag {
    if tests.has(Test::Gap) {
        return Flag::Missing;
    }
    let worst = |test| match test {
        Test::Temperature if quantity == ProbeKind::Orp => 2,
        Test::Gap
        | Test::GrossRange
        | Test::OverRange
        | Test::Rail
        | Test::Temperature
        | Test::NoCalibration => 3,
        Test::Spike
        | Test::RateOfChange
        | Test::FlatLine
        | Test::Attenuated
        | Test::Pinned
        | Test::Mains
        | Test::TemperatureFrozen
        | Test::Pair
        | Test::Uncertainty
        | Test::Span
        | Test::Sodium
        | Test::Acid => 2,
        Test::Hold => 1,
    };
    match tests.iter().map(worst).max() {
        None | Some(0) => Flag::Pass,
        Some(1) => Flag::NotEvaluated,
        Some(2) => Flag::Suspect,
        Some(_) => Flag::Fail,
    }
}

struct UsableTemperature {
    /// With its standard uncertainty.
    usable: Option<(Celsius, f64)>,
    shown: Option<f64>,
    source: TemperatureSource,
}

fn usable_temperature(point: &Point, arrived: Figure) -> UsableTemperature {
    let (measured, source) = match arrived {
        Figure::Number(c) => (Celsius::new(round_temp_c(c)).ok(), TemperatureSource::Meter),
        Figure::Resistance(ohm) => (from_resistance(point, ohm), TemperatureSource::Resistance),
        Figure::Nothing | Figure::OverRange => (None, TemperatureSource::None),
    };
    if let Some(t) = measured.and_then(|t| temperature::judge(t).ok()) {
        return UsableTemperature {
            usable: Some((t, point.u_temp_c)),
            shown: Some(t.c()),
            source,
        };
    }
    let stand_in = match &point.temperature {
        Temperature::Fixed(c) => Some((*c, point.u_temp_c, TemperatureSource::Fixed)),
        Temperature::Signal { fallback_c, .. } | Temperature::Resistance { fallback_c, .. } => {
            fallback_c.map(|c| (c, U_FALLBACK_C, TemperatureSource::Fallback))
        }
    };
    match stand_in.and_then(|(c, u, source)| Some((Celsius::new(round_temp_c(c)).ok()?, u, source)))
    {
        Some((t, u, source)) => UsableTemperature {
            usable: Some((t, u)),
            shown: Some(t.c()),
            source,
        },
        None => UsableTemperature {
            usable: None,
            shown: measured.map(Celsius::c),
            source,
        },
    }
}

fn from_resistance(point: &Point, ohm: f64) -> Option<Celsius> {
    let Temperature::Resistance { sensor, .. } = &point.temperature else {
        return None;
    };
    let ohms = Ohms::new(ohm).ok()?;
    let t = match sensor {
        Sensor::Pt100 => temperature::PT100.temperature(ohms),
        Sensor::Pt1000 => temperature::PT1000.temperature(ohms),
    };
    Celsius::new(round_temp_c(t.ok()?.c())).ok()
}

fn usable_mv(arrived: Figure, tests: &mut Tests) -> Option<Millivolts> {
    match arrived {
        Figure::Number(mv) => {
            let mv = Millivolts::new(round_mv(mv)).ok();
            if mv.is_none() {
                tests.mark(Test::GrossRange);
            }
            mv
        }
        Figure::OverRange => {
            tests.mark(Test::OverRange);
            None
        }
        Figure::Nothing | Figure::Resistance(_) => {
            tests.mark(Test::Gap);
            None
        }
    }
}

/// pH with its u, and the tests that hang on it; `None` where the potential is no pH at all.
fn ph(
    mv: Millivolts,
    t: Celsius,
    (probe, calibration): (&ProbeHistory, &Dated<Calibration>),
    inputs: &Inputs,
    tests: &mut Tests,
) -> Option<Converted> {
    let line = &calibration.fact.line;
    // A glass electrode cannot read beyond 8 pH from its isopotential point (electrode model, section 4).
    if mv.mv().abs() > 8.0 * nernst_slope(t).mv_per_ph() + line.offset_mv.abs() {
        tests.mark(Test::GrossRange);
    }
    let Ok(converted) = convert::to_ph(mv, t, line, probe.spec.ph_iso, inputs) else {
        tests.mark(Test::GrossRange);
        return None;
    };
    let [low, high] = calibration.fact.span;
    if converted.value < low - SPAN_MARGIN_PH || converted.value > high + SPAN_MARGIN_PH {
        tests.mark(Test::Span);
    }
    if converted.value > 12.0 {
        tests.mark(Test::Sodium);
    }
    if converted.value < 0.5 {
        tests.mark(Test::Acid);
    }
    Some(converted)
}

/// Potential against the probe's own reference with its u.
fn orp(mv: Millivolts, line: &ElectrodeLine, inputs: &Inputs, tests: &mut Tests) -> Converted {
    // Water itself is taken apart well inside ±2000 mV; no metal electrode reads beyond (common practice, no source).
    if mv.mv().abs() > 2_000.0 {
        tests.mark(Test::GrossRange);
    }
    convert::to_orp(mv, line, inputs)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::config::site::SignalRef;
    use crate::electrode::history::{Book, Hold, ProbeId, ProbeSpec, Tag, Verdict};
    use crate::electrode::orp::ReferenceElectrode;
    use std::sync::Arc;

    const SIGNAL: SignalRef = SignalRef {
        meter: 0,
        signal: 0,
    };

    fn point(temperature: Temperature) -> Point {
        Point {
            tag: Tag::from("POND-3"),
            quantity: ProbeKind::Ph,
            signal: SIGNAL,
            temperature,
            every: std::time::Duration::from_secs(1),
            tolerance: 0.10,
            u_junction: 0.01,
            u_temp_c: 0.2,
            alarm: None,
            redundant_with: Vec::new(),
            water: None,
            effluent: None,
        }
    }

    fn measured() -> Point {
        point(Temperature::Signal {
            signal: SIGNAL,
            fallback_c: None,
        })
    }

    fn dated<T>(id: i64, at_ms: i64, fact: T) -> Dated<T> {
        let at = Timestamp::from_ms(at_ms);
        Dated {
            id,
            at,
            entered: at,
            by: "R. Alder".to_owned(),
            fact,
        }
    }

    /// A probe at POND-3 from 0 ms, calibrated at 1000 ms: offset 0, slope 1.
    fn facts() -> Book {
        let mut book = Book::default();
        let probe = ProbeId::from("G-1");
        let spec = ProbeSpec {
            id: probe.clone(),
            kind: ProbeKind::Ph,
            reference: ReferenceElectrode::AgCl3M,
            ph_iso: 7.0,
            serial: None,
        };
        book.add_probe(dated(1, 0, spec));
        book.move_probe(&probe, dated(2, 0, Some(Tag::from("POND-3"))));
        let line = ElectrodeLine {
            offset_mv: 0.0,
            slope: 1.0,
            var_offset_mv2: 0.1,
            var_slope: 1e-5,
            cov_mv: 0.0,
        };
        let calibration = Calibration {
            probe,
            readings: Vec::new(),
            line,
            residuals_mv: Vec::new(),
            verdict: Verdict::Accepted,
            reasons: Vec::new(),
            as_found_error: None,
            span: [4.0, 10.0],
            override_why: None,
        };
        book.add_calibration(dated(3, 1_000, calibration));
        book
    }

    fn book() -> Standing {
        Standing::new(Arc::new(facts()))
    }

    fn arrival(at_ms: i64, mv: f64, temp_c: f64) -> Arrival {
        let number = |x: f64| {
            if x.is_nan() {
                Figure::Nothing
            } else {
                Figure::Number(x)
            }
        };
        Arrival {
            at: Timestamp::from_ms(at_ms),
            mv: number(mv),
            temperature: number(temp_c),
        }
    }

    #[test]
    fn minus_177_48_mv_at_25_c_on_an_ideal_electrode_is_ph_10() {
        // Source: Nernst equation, 59.159 mV/pH at 25 °C (CODATA 2022): 3 pH are 177.478 mV.
        let reading = read(&measured(), &book(), &arrival(2_000, -177.48, 25.0));
        assert_eq!(reading.flag, Flag::Pass, "{}", reading.tests);
        assert!(
            (reading.value.unwrap() - 10.000).abs() < 0.000_1,
            "{reading:?}"
        );
        assert_eq!(reading.calibration, Some(3));
    }

    #[test]
    fn a_lost_temperature_sensor_fails_the_value_and_keeps_the_raw_figures() {
        for (temp_c, shown) in [
            (f64::NAN, None),
            (999.9, Some(999.9)),
            (-242.0, Some(-242.0)),
        ] {
            let reading = read(&measured(), &book(), &arrival(2_000, -50.0, temp_c));
            assert_eq!(
                (reading.flag, reading.value),
                (Flag::Fail, None),
                "{temp_c}"
            );
            assert!(reading.tests.has(Test::Temperature));
            assert_eq!((reading.mv, reading.temp_c), (Some(-50.0), shown));
        }
    }

    #[test]
    fn a_configured_fallback_stands_in_with_a_larger_u_and_its_name() {
        let with = point(Temperature::Signal {
            signal: SIGNAL,
            fallback_c: Some(15.0),
        });
        let good = read(&with, &book(), &arrival(2_000, -150.0, 15.0));
        let fallen = read(&with, &book(), &arrival(2_000, -150.0, 999.9));
        assert_eq!(fallen.temperature_source, TemperatureSource::Fallback);
        assert_eq!(fallen.temp_c, Some(15.0));
        assert!(fallen.u > good.u, "{:?} against {:?}", fallen.u, good.u);
    }

    #[test]
    fn before_its_first_calibration_a_probe_gives_raw_figures_and_no_value() {
        let reading = read(&measured(), &book(), &arrival(999, -50.0, 25.0));
        assert_eq!(
            (reading.flag, reading.value, reading.mv),
            (Flag::Fail, None, Some(-50.0))
        );
        assert_eq!(reading.tests.to_string(), "no-calibration");
    }

    #[test]
    fn a_hold_marks_the_reading_and_ends_by_itself() {
        let mut book = facts();
        let hold = Hold {
            point: Tag::from("POND-3"),
            until: Timestamp::from_ms(5_000),
            why: "cleaning".to_owned(),
        };
        book.add_hold(dated(4, 3_000, hold));
        let standing = Standing::new(Arc::new(book));
        let flag_at = |at_ms| read(&measured(), &standing, &arrival(at_ms, -50.0, 25.0)).flag;
        assert_eq!(
            [2_999, 3_000, 4_999, 5_000].map(flag_at),
            [
                Flag::Pass,
                Flag::NotEvaluated,
                Flag::NotEvaluated,
                Flag::Pass
            ]
        );
    }

    #[test]
    fn words_for_nothing_and_for_over_range_are_rows_without_numbers() {
        let mut over = arrival(2_000, f64::NAN, 25.0);
        assert_eq!(read(&measured(), &book(), &over).flag, Flag::Missing);
        over.mv = Figure::OverRange;
        let reading = read(&measured(), &book(), &over);
        assert_eq!(
            (reading.flag, reading.tests.to_string().as_str()),
            (Flag::Fail, "over-range")
        );
    }

    #[test]
    fn a_potential_no_glass_electrode_can_give_fails() {
        let reading = read(&measured(), &book(), &arrival(2_000, 480.0, 25.0));
        assert_eq!(reading.flag, Flag::Fail);
        assert!(reading.tests.has(Test::GrossRange));
    }

    #[test]
    fn u_above_the_tolerance_makes_the_reading_suspect() {
        let tight = Point {
            tolerance: 0.01,
            ..measured()
        };
        let reading = read(&tight, &book(), &arrival(2_000, -50.0, 25.0));
        assert_eq!(
            (reading.flag, reading.tests.to_string().as_str()),
            (Flag::Suspect, "uncertainty")
        );
    }

    #[test]
    fn a_resistance_becomes_a_temperature_by_its_sensor() {
        // Source: IEC 60751, Pt1000 at 25 °C: 1097.35 Ω.
        let with = point(Temperature::Resistance {
            signal: SIGNAL,
            sensor: Sensor::Pt1000,
            fallback_c: None,
        });
        let mut arrival = arrival(2_000, -177.48, f64::NAN);
        arrival.temperature = Figure::Resistance(1_097.35);
        let reading = read(&with, &book(), &arrival);
        assert!(
            (reading.temp_c.unwrap() - 25.0).abs() < 0.005,
            "{reading:?}"
        );
        assert_eq!(reading.temperature_source, TemperatureSource::Resistance);
    }
}
