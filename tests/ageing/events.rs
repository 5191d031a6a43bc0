//! What a probe's history becomes as observations.

use crate::support::{K25, after_days, check, dated};
use halfcell::electrode::ageing::{Comparison, Kind, Observation, Prior, Track, observe};
use halfcell::electrode::history::{
    Calibration, Dated, Grab, ProbeHistory, ProbeKind, ProbeSpec, Service, Stage, StandardReading,
    Verdict, Verification,
};
use halfcell::electrode::orp::ReferenceElectrode;

const GLASS: (ProbeKind, f64) = (ProbeKind::Ph, 7.0);

fn reading(value: f64, mv: f64) -> StandardReading {
    StandardReading {
        name: "buffer".into(),
        lot: None,
        value,
        u_value: 0.005,
        value_per_c: -0.003,
        mv,
        u_mv: 0.2,
        temp_c: 25.0,
        u_temp_c: 0.3,
    }
}

fn calibration(id: i64, days: f64, verdict: Verdict) -> Dated<Calibration> {
    let fact = Calibration {
        probe: "P-1".into(),
        readings: vec![reading(4.0, 175.0), reading(7.0, 1.0)],
        line: crate::support::line(1.0, 0.98),
        residuals_mv: Vec::new(),
        verdict,
        reasons: Vec::new(),
        as_found_error: None,
        span: [4.0, 7.0],
        override_why: None,
    };
    dated(id, days, fact)
}

fn history() -> ProbeHistory {
    let verification = Verification {
        probe: "P-1".into(),
        stage: Stage::Check,
        readings: vec![reading(7.0, 2.0)],
        errors: Vec::new(),
        passed: true,
        tolerance: 0.1,
        reasons: Vec::new(),
    };
    ProbeHistory {
        spec: ProbeSpec {
            id: "P-1".into(),
            kind: ProbeKind::Ph,
            reference: ReferenceElectrode::AgCl3M,
            ph_iso: 7.0,
            serial: None,
        },
        added: after_days(0.0),
        moves: Vec::new(),
        calibrations: vec![
            calibration(1, 0.0, Verdict::Accepted),
            calibration(3, 30.0, Verdict::Rejected),
            calibration(4, 40.0, Verdict::Accepted),
        ],
        struck: vec![dated(6, 41.0, 4)],
        verifications: vec![dated(2, 15.0, verification)],
        services: vec![dated(5, 29.0, Service::Regelled)],
        confirmed: vec![dated(7, 42.0, 3)],
    }
}

#[test]
fn a_history_gives_its_events_in_order_without_those_struck_out() {
    let all = observe(&history(), &[], after_days(100.0));
    let told: Vec<_> = all.iter().map(|o| (o.event, o.kind, o.confirmed)).collect();
    assert_eq!(
        told,
        [
            (1, Kind::Calibration, false),
            (2, Kind::Verification, false),
            (5, Kind::Service, false),
            // Rejected for `value`, and still a reading in two buffers.
            (3, Kind::Calibration, true),
        ]
    );
    assert_eq!(observe(&history(), &[], after_days(15.0)).len(), 2);
}

#[test]
fn a_buffer_says_how_offset_and_slope_lie() {
    let all = observe(&history(), &[], after_days(0.0));
    let row = all[0].rows[0];
    // x = k(25 °C)·(7 − 4); variance of signal, bottle and thermometer: ∂x/∂T = 3·k/T + k·0.003, k = 59.159 mV/pH at 298.15 K.
    let per_c = 3.0 * K25 / 298.15 + K25 * 0.003;
    let variance = 0.2_f64.powi(2) + (K25 * 0.005).powi(2) + (per_c * 0.3).powi(2);
    assert!((row.h[1] - 3.0 * K25).abs() < 1e-4, "{row:?}");
    assert!(
        (row.var_mv2 - variance).abs() < 1e-6,
        "{row:?} instead of {variance}"
    );
    // 0.01 pH of junction for all rows of the visit together.
    assert!((all[0].shared_var_mv2 - (0.01 * K25).powi(2)).abs() < 1e-6);
}

#[test]
fn a_grab_sample_pulls_the_track_towards_it() {
    let checks = vec![check(1, 0.0, &[4.0, 7.0], (0.0, 0.98), 0.4)];
    // The probe shows what offset 0 makes of pH 7.80; the bench says 7.70: the offset has gone to −5.8 mV.
    let grab = dated(
        2,
        60.0,
        Grab {
            point: "POND-3".into(),
            value: 7.70,
            u: 0.03,
        },
    );
    let mv = 0.98 * K25 * (7.0 - 7.80);
    let mut with = checks.clone();
    with.push(Observation::grab(&grab, mv, 25.0, GLASS));
    let offset = |checks: &[Observation]| {
        let track = Track::run(checks, &Prior::of(ProbeKind::Ph)).unwrap();
        track
            .filtered_at(after_days(61.0))
            .unwrap()
            .line()
            .offset_mv
    };
    let pulled = offset(&with) - offset(&checks);
    assert!((-5.9..-3.5).contains(&pulled), "{pulled:.2} mV");
}

#[test]
fn comparisons_with_one_neighbour_between_its_checks_weigh_as_one() {
    let seen = Comparison {
        mv: -46.0,
        temp_c: 25.0,
        value: 7.75,
        u_value: 0.03,
    };
    let base = vec![check(1, 0.0, &[4.0, 7.0], (0.0, 0.98), 0.4)];
    let after = |n: u32| {
        let mut all = base.clone();
        // All at one moment, so that nothing but their weight can differ.
        for _ in 0..n {
            all.push(Observation::pair(after_days(20.0), &seen, n, GLASS));
        }
        let track = Track::run(&all, &Prior::of(ProbeKind::Ph)).unwrap();
        track.filtered_at(after_days(20.0)).unwrap().line()
    };
    let (one, twenty) = (after(1), after(20));
    assert!(
        (one.offset_mv - twenty.offset_mv).abs() < 1e-6,
        "{one:?} {twenty:?}"
    );
    assert!(
        (one.var_offset_mv2 - twenty.var_offset_mv2).abs() < 1e-6,
        "{one:?} {twenty:?}"
    );
}

#[test]
fn new_electrolyte_lets_the_offset_go_and_leaves_the_slope() {
    let mut checks = vec![check(1, 0.0, &[4.0, 7.0], (0.0, 0.98), 0.4)];
    let before = Track::run(&checks, &Prior::of(ProbeKind::Ph)).unwrap();
    checks.push(Observation::service(&dated(2, 10.0, Service::Regelled)));
    let after = Track::run(&checks, &Prior::of(ProbeKind::Ph)).unwrap();
    let line = |track: &Track| track.filtered_at(after_days(10.0)).unwrap().line();
    let (before, after) = (line(&before), line(&after));
    assert!((after.var_offset_mv2 - before.var_offset_mv2 - 100.0).abs() < 1e-9);
    assert!(after.var_slope.sqrt() < 0.02, "{after:?}");
}
