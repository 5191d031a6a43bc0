//! Laws of the filter and smoother.

use crate::support::{K25, after_days, check, line};
use halfcell::electrode::ageing::proration::prorated_line;
use halfcell::electrode::ageing::{Noise, Observation, Prior, State, Track};
use halfcell::electrode::history::ProbeKind;
use proptest::prelude::*;

/// Steps of ordinary life: days until the next check, buffers, how the electrode moved, how well it was read.
fn life() -> impl Strategy<Value = Vec<Observation>> {
    let step = (
        0.01..60.0_f64,
        0..4_usize,
        -4.0..4.0_f64,
        -0.01..0.01_f64,
        0.1..2.0_f64,
    );
    prop::collection::vec(step, 1..14).prop_map(|steps| {
        let (mut day, mut offset, mut slope) = (0.0, 0.0, 0.98);
        steps
            .into_iter()
            .enumerate()
            .map(|(n, (days, buffers, by_mv, by_slope, sd))| {
                day += days;
                offset += by_mv;
                slope += by_slope;
                let phs: &[f64] = [&[7.0][..], &[4.0, 7.0], &[4.0, 7.0, 10.0], &[9.18]][buffers];
                check(i64::try_from(n).unwrap() + 1, day, phs, (offset, slope), sd)
            })
            .collect()
    })
}

fn states(track: &Track) -> Vec<State> {
    (0..100)
        .map(|n| after_days(f64::from(n) * 9.3))
        .flat_map(|t| [track.filtered_at(t), track.smoothed_at(t)])
        .flatten()
        .collect()
}

/// Smallest eigenvalue is not below 0: every leading minor of the covariance, scaled to unit diagonal, within rounding.
fn is_positive(state: &State) -> bool {
    let d: [f64; 4] = std::array::from_fn(|i| state.cov[i][i].sqrt().max(1e-150));
    let mut lower = [[0.0; 4]; 4];
    for i in 0..4 {
        for j in 0..=i {
            let done: f64 = (0..j).map(|k| lower[i][k] * lower[j][k]).sum();
            let rest: f64 = state.cov[i][j] / (d[i] * d[j]) - done;
            if i == j {
                if rest < -1e-9 {
                    return false;
                }
                lower[i][j] = rest.max(0.0).sqrt();
            } else if lower[j][j] > 1e-6 {
                lower[i][j] = rest / lower[j][j];
            }
        }
    }
    true
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 48, failure_persistence: None, ..ProptestConfig::default() })]

    #[test]
    fn covariances_are_symmetric_and_positive(life in life()) {
        let track = Track::run(&life, &Prior::of(ProbeKind::Ph)).unwrap();
        for state in states(&track) {
            for i in 0..4 {
                prop_assert!(state.cov[i][i] >= 0.0);
                for j in 0..4 {
                    prop_assert_eq!(state.cov[i][j].to_bits(), state.cov[j][i].to_bits());
                }
            }
            prop_assert!(is_positive(&state), "{state:?}");
        }
    }

    #[test]
    fn no_u_shrinks_by_adding_noise(life in life(), which in 0..4_usize, more in 1.0..20.0_f64) {
        let calm = Noise::glass();
        let mut restless = calm;
        match which {
            0 => restless.q_offset *= more,
            1 => restless.q_drift *= more,
            2 => restless.q_slope *= more,
            _ => restless.q_slope_rate *= more,
        }
        // Every check confirmed, so that both hold the same checks; and at most one jump's difference would show.
        let mut life = life;
        for check in &mut life {
            for row in &mut check.rows {
                row.y_mv = 0.98 * row.h[1];
            }
        }
        let run = |noise| states(&Track::run(&life, &Prior::only(noise, ProbeKind::Ph)).unwrap());
        for (calm, restless) in run(calm).iter().zip(run(restless)) {
            for x in [-170.0, 0.0, 60.0] {
                let var = |s: &State| s.cov[0][0] + 2.0 * x * s.cov[0][2] + x * x * s.cov[2][2];
                prop_assert!(var(&restless) >= var(calm) * (1.0 - 1e-9), "{} after {}", var(&restless), var(calm));
            }
        }
    }

    #[test]
    fn no_u_shrinks_when_a_reading_gets_worse(life in life(), which in 0..14_usize) {
        let mut level = life;
        for check in &mut level {
            for row in &mut check.rows {
                row.y_mv = 0.98 * row.h[1];
            }
        }
        let mut worse = level.clone();
        let n = worse.len();
        worse[which % n].shared_var_mv2 += 4.0;
        let run = |life: &[Observation]| states(&Track::run(life, &Prior::only(Noise::glass(), ProbeKind::Ph)).unwrap());
        for (good, bad) in run(&level).iter().zip(run(&worse)) {
            prop_assert!(bad.cov[0][0] >= good.cov[0][0] * (1.0 - 1e-9));
        }
    }

    #[test]
    fn events_entered_in_any_order_give_the_same_bits(life in life(), seed in any::<u64>()) {
        let prior = Prior::of(ProbeKind::Ph);
        let once = Track::run(&life, &prior).unwrap();
        let mut shuffled = life;
        let mut seed = seed;
        for i in (1..shuffled.len()).rev() {
            seed = seed.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1);
            shuffled.swap(i, usize::try_from(seed >> 33).unwrap() % (i + 1));
        }
        let again = Track::run(&shuffled, &prior).unwrap();
        prop_assert_eq!(states(&once), states(&again));
        prop_assert_eq!(once.log_likelihood().to_bits(), again.log_likelihood().to_bits());
    }

    #[test]
    fn what_comes_later_does_not_change_what_was_known(life in life(), cut in 0..14_usize) {
        let prior = Prior::of(ProbeKind::Ph);
        let whole = Track::run(&life, &prior).unwrap();
        let n = cut % life.len() + 1;
        let first = Track::run(&life[..n], &prior).unwrap();
        let until = life.get(n).map_or(after_days(1e4), |o| o.at.plus_ms(-1));
        prop_assert_eq!(whole.filtered_at(until), first.filtered_at(until));
    }
}

#[test]
fn two_checks_and_no_other_knowledge_are_linear_proration() {
    // Exact checks, nothing known before, offset and slope each a plain walk.
    let walk = Noise {
        q_offset: 0.3,
        q_drift: 0.0,
        tau_days: 60.0,
        q_slope: 1e-6,
        slope_rate: 0.0,
        q_slope_rate: 0.0,
        slope_tau_days: 60.0,
    };
    let mut flat = Prior::only(walk, ProbeKind::Ph);
    flat.start_offset_sd_mv = 1e4;
    flat.start_slope_sd = 1e2;
    let mut checks = vec![
        check(1, 3.0, &[4.0, 7.0], (3.0, 0.985), 1e-7),
        check(2, 17.0, &[4.0, 7.0], (-5.4, 0.951), 1e-7),
    ];
    for check in &mut checks {
        check.shared_var_mv2 = 0.0;
        check.confirmed = true;
    }
    let track = Track::run(&checks, &flat).unwrap();
    for n in 0..=100 {
        let part = f64::from(n) / 100.0;
        // The moment just before the second check, not after it.
        let t = after_days(3.0 + 14.0 * part);
        let got = track.smoothed_at(t).unwrap().line();
        let want = prorated_line(&line(3.0, 0.985), &line(-5.4, 0.951), part);
        let ph = |l: &halfcell::electrode::history::ElectrodeLine| {
            7.0 - (-62.0 - l.offset_mv) / (l.slope * K25)
        };
        assert!(
            (got.offset_mv - want.offset_mv).abs() < 1e-9,
            "{part}: {} mV",
            got.offset_mv - want.offset_mv
        );
        assert!(
            (ph(&got) - ph(&want)).abs() < 1e-9,
            "{part}: {} pH",
            ph(&got) - ph(&want)
        );
    }
}

#[test]
fn a_segment_reads_as_the_track_itself() {
    let checks = [
        check(1, 0.0, &[4.0, 7.0], (1.0, 0.98), 0.5),
        check(2, 29.0, &[4.0, 7.0], (4.0, 0.97), 0.5),
        check(3, 44.0, &[7.0], (6.0, 0.97), 0.5),
    ];
    let track = Track::run(&checks, &Prior::of(ProbeKind::Ph)).unwrap();
    for n in 0..500 {
        let t = after_days(f64::from(n) * 0.113);
        for (segment, state) in [
            (
                track.filtered_segment(t).unwrap(),
                track.filtered_at(t).unwrap(),
            ),
            (
                track.smoothed_segment(t).unwrap(),
                track.smoothed_at(t).unwrap(),
            ),
        ] {
            assert!(segment.holds(t));
            let (got, want) = (segment.line_at(t), state.line());
            // A hundredth of a millivolt is a fifth of the last digit stored; two per cent of the variance one of u.
            assert!(
                (got.offset_mv - want.offset_mv).abs() < 0.01,
                "{n}: {got:?} {want:?}"
            );
            assert!((got.slope - want.slope).abs() < 1e-5);
            assert!(
                (got.var_offset_mv2 / want.var_offset_mv2 - 1.0).abs() < 0.02,
                "{n}: {got:?} {want:?}"
            );
        }
    }
}
