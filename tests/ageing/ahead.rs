//! Calibrate-by.

use crate::support::{after_days, check};
use halfcell::electrode::ageing::{
    CalibrateBy, Demands, Kind, Noise, Observation, Prior, Reason, Row, Track, calibrate_by, learn,
};
use halfcell::electrode::history::{ElectrodeLine, ProbeKind};
use halfcell::electrode::units::Timestamp;

const POND: Demands = Demands {
    kind: ProbeKind::Ph,
    ph_iso: 7.0,
    tolerance: 0.15,
    slope: [0.90, 1.03],
    offset_mv: 30.0,
    usual_ph: 7.8,
    usual_temp_c: 18.0,
    u_junction: 0.01,
};

/// Monthly calibrations by an electrode whose offset and slope move by so much a month; the last on day 150.
fn life(offset_per_month: f64, slope_per_month: f64) -> Vec<Observation> {
    (0..6)
        .map(|n| {
            let month = f64::from(n);
            let at = (offset_per_month * month, 0.99 + slope_per_month * month);
            check(i64::from(n) + 1, 30.0 * month, &[4.0, 7.0], at, 0.4)
        })
        .collect()
}

fn ahead(life: &[Observation], prior: &Prior, demands: &Demands) -> CalibrateBy {
    let track = Track::run(life, prior).unwrap();
    let line = track.filtered_at(after_days(150.0)).unwrap().line();
    calibrate_by(
        &track,
        (&line, after_days(150.0)),
        demands,
        after_days(150.0),
    )
    .unwrap()
}

fn practice() -> Prior {
    Prior::of(ProbeKind::Ph)
}

fn days(t: Timestamp) -> f64 {
    t.days_since(after_days(150.0))
}

#[test]
fn an_ordinary_electrode_is_wanted_back_within_weeks_for_a_narrow_tolerance() {
    let ahead = ahead(&life(0.5, -0.005), &practice(), &POND);
    assert_eq!(ahead.reason, Reason::Uncertainty);
    assert!(
        ahead.earliest <= ahead.by && ahead.by <= ahead.latest,
        "{ahead:?}"
    );
    assert!(
        (10.0..90.0).contains(&days(ahead.by)),
        "in {:.0} days",
        days(ahead.by)
    );
}

#[test]
fn glass_that_wears_leaves_its_window_by_slope() {
    let wide = Demands {
        tolerance: 1.0,
        ..POND
    };
    // 0.99 to 0.915 in five months: below 0.90 in one more.
    let ahead = ahead(&life(0.0, -0.015), &practice(), &wide);
    assert_eq!(ahead.reason, Reason::Slope);
    assert!(
        (15.0..60.0).contains(&days(ahead.by)),
        "in {:.0} days",
        days(ahead.by)
    );
}

#[test]
fn a_reference_that_runs_away_leaves_its_window_by_offset() {
    let wide = Demands {
        tolerance: 1.0,
        ..POND
    };
    // 25 mV after five months, 5 a month: beyond 30 in one more.
    let ahead = ahead(&life(5.0, 0.0), &practice(), &wide);
    assert_eq!(ahead.reason, Reason::Offset);
    assert!(
        (15.0..60.0).contains(&days(ahead.by)),
        "in {:.0} days",
        days(ahead.by)
    );
}

#[test]
fn nothing_keeps_an_electrode_from_a_check_for_more_than_two_years() {
    let indifferent = Demands {
        tolerance: 20.0,
        slope: [0.0, 10.0],
        offset_mv: 1e6,
        ..POND
    };
    let ahead = ahead(&life(0.0, 0.0), &practice(), &indifferent);
    assert_eq!(ahead.reason, Reason::Age);
    assert!((days(ahead.by) - 730.0).abs() < 0.01);
}

#[test]
fn a_tighter_tolerance_and_more_noise_never_put_it_off() {
    let mut last = f64::INFINITY;
    for tolerance in [0.30, 0.20, 0.15, 0.10, 0.05] {
        let by = days(
            ahead(
                &life(0.5, -0.005),
                &practice(),
                &Demands { tolerance, ..POND },
            )
            .by,
        );
        assert!(by <= last, "{tolerance}: in {by} days, after {last}");
        last = by;
    }
    let mut last = f64::INFINITY;
    for factor in [0.5, 1.0, 2.0, 4.0] {
        let noise = Noise {
            q_offset: factor * Noise::glass().q_offset,
            ..Noise::glass()
        };
        let by = days(
            ahead(
                &life(0.5, -0.005),
                &Prior::only(noise, ProbeKind::Ph),
                &POND,
            )
            .by,
        );
        assert!(by <= last, "{factor}: in {by} days, after {last}");
        last = by;
    }
}

#[test]
fn it_does_not_move_from_day_to_day_while_nothing_happens() {
    let track = Track::run(&life(0.5, -0.005), &practice()).unwrap();
    let line = track.filtered_at(after_days(150.0)).unwrap().line();
    let said =
        |day| calibrate_by(&track, (&line, after_days(150.0)), &POND, after_days(day)).unwrap();
    assert_eq!(said(150.0), said(151.0));
    assert_eq!(said(150.0), said(170.0));
}

#[test]
fn a_value_already_off_is_wanted_at_once() {
    let track = Track::run(&life(0.5, -0.005), &practice()).unwrap();
    let line = ElectrodeLine {
        offset_mv: 20.0,
        ..track.filtered_at(after_days(150.0)).unwrap().line()
    };
    let said = calibrate_by(&track, (&line, after_days(30.0)), &POND, after_days(150.0)).unwrap();
    assert_eq!(said.by, after_days(150.0));
}

#[test]
fn a_metal_electrode_has_its_own() {
    let checks: Vec<Observation> = (0..6)
        .map(|n| Observation {
            at: after_days(30.0 * f64::from(n)),
            event: i64::from(n) + 1,
            kind: Kind::Calibration,
            rows: vec![Row {
                h: [1.0, 0.0],
                y_mv: 2.0 + f64::from(n % 2),
                var_mv2: 4.0,
            }],
            shared_var_mv2: 1.0,
            jump: [0.0; 2],
            confirmed: false,
        })
        .collect();
    let basin = Demands {
        kind: ProbeKind::Orp,
        tolerance: 20.0,
        offset_mv: 60.0,
        u_junction: 1.0,
        ..POND
    };
    let ahead = ahead(&checks, &Prior::of(ProbeKind::Orp), &basin);
    assert_eq!(ahead.reason, Reason::Uncertainty);
    assert!(
        (20.0..400.0).contains(&days(ahead.by)),
        "in {:.0} days",
        days(ahead.by)
    );
    assert!(ahead.earliest <= ahead.by && ahead.by <= ahead.latest);
}

/// What a quiet and a restless site make of an electrode they have not seen.
#[test]
fn a_site_of_restless_electrodes_trusts_a_new_one_less() {
    let site = |scale: f64| {
        let probes: Vec<Vec<Observation>> = (0..6)
            .map(|probe| {
                (0..10)
                    .map(|n| {
                        let wander = scale * f64::from((n * (probe + 3) * 7) % 5 - 2);
                        check(
                            i64::from(n) + 1,
                            30.0 * f64::from(n),
                            &[4.0, 7.0],
                            (wander, 0.98),
                            0.4,
                        )
                    })
                    .collect()
            })
            .collect();
        learn(&probes, &practice())
    };
    let new = [check(1, 0.0, &[4.0, 7.0], (0.0, 0.98), 0.4)];
    let sd = |prior: &Prior| {
        let track = Track::run(&new, prior).unwrap();
        track
            .filtered_at(after_days(20.0))
            .unwrap()
            .line()
            .var_offset_mv2
            .sqrt()
    };
    let (quiet, ordinary, restless) = (sd(&site(0.2)), sd(&practice()), sd(&site(8.0)));
    assert!(
        quiet < ordinary && ordinary < restless,
        "{quiet:.2} {ordinary:.2} {restless:.2} mV"
    );
    assert!((site(0.2).shares.iter().sum::<f64>() - 1.0).abs() < 1e-12);
}
