//! What does not fit: wrong bottles are held out, jumps are believed.

use crate::support::{after_days, check};
use halfcell::electrode::ageing::{HELD_OUT_BEYOND, Observation, Outcome, Prior, Track};
use halfcell::electrode::history::ProbeKind;

/// Four monthly calibrations of a calm electrode.
fn calm() -> Vec<Observation> {
    [0.0, 30.0, 60.0, 90.0]
        .iter()
        .zip([1.0, 2.0, 1.5, 2.5])
        .zip(1..)
        .map(|((day, offset), id)| check(id, *day, &[4.0, 7.0], (offset, 0.98), 0.5))
        .collect()
}

fn run(checks: &[Observation]) -> Track {
    Track::run(checks, &Prior::of(ProbeKind::Ph)).unwrap()
}

fn outcomes(track: &Track) -> Vec<Outcome> {
    track.events().map(|e| e.outcome).collect()
}

fn with(more: &[Observation]) -> Vec<Observation> {
    let mut all = calm();
    all.extend(more.iter().cloned());
    all
}

/// A reading in pH 4 buffer entered as pH 7: 170 mV off.
fn wrong_bottle(event: i64, day: f64) -> Observation {
    check(event, day, &[7.0], (2.5 + 0.98 * 177.5, 0.98), 0.5)
}

#[test]
fn a_verification_in_the_wrong_buffer_moves_nothing() {
    let (clean, poisoned) = (run(&calm()), run(&with(&[wrong_bottle(9, 100.0)])));
    for n in 0..=200 {
        let t = after_days(f64::from(n));
        let (a, b) = (
            clean.filtered_at(t).unwrap().line(),
            poisoned.filtered_at(t).unwrap().line(),
        );
        assert!(
            (a.offset_mv - b.offset_mv).abs() < 1e-9
                && (a.var_offset_mv2 - b.var_offset_mv2).abs() < 1e-6,
            "{n}: {a:?} {b:?}"
        );
        let (a, b) = (
            clean.smoothed_at(t).unwrap().line(),
            poisoned.smoothed_at(t).unwrap().line(),
        );
        assert!((a.offset_mv - b.offset_mv).abs() < 1e-9, "{n}: {a:?} {b:?}");
    }
    let seen = poisoned.events().last().unwrap();
    assert_eq!(seen.outcome, Outcome::HeldOut);
    assert!(seen.innovations[0].sigmas() > HELD_OUT_BEYOND);
    assert!((seen.innovations[0].mv - 174.0).abs() < 3.0, "{seen:?}");
}

#[test]
fn once_confirmed_it_counts() {
    let mut confirmed = wrong_bottle(9, 100.0);
    confirmed.confirmed = true;
    let track = run(&with(&[confirmed]));
    assert_eq!(outcomes(&track)[4], Outcome::TakenAsJump);
    assert!(
        track
            .filtered_at(after_days(101.0))
            .unwrap()
            .line()
            .offset_mv
            > 100.0
    );
}

#[test]
fn two_buffers_that_agree_on_a_jump_are_believed_at_once() {
    let track = run(&with(&[check(9, 120.0, &[4.0, 7.0], (-33.0, 0.98), 0.5)]));
    assert_eq!(outcomes(&track)[4], Outcome::TakenAsJump);
    let after = track.filtered_at(after_days(120.0)).unwrap().line();
    assert!((after.offset_mv + 33.0).abs() < 1.5, "{after:?}");
    // When it jumped is not known: u of the month before is as wide as the jump.
    let between = track.smoothed_at(after_days(105.0)).unwrap().line();
    assert!(between.var_offset_mv2.sqrt() > 5.0, "{between:?}");
}

#[test]
fn one_wrong_bottle_of_two_is_no_jump() {
    // pH 10.01 taken for pH 9.18: 48 mV on one buffer, none on the other.
    let mut one_wrong = check(9, 120.0, &[7.0, 9.18], (2.5, 0.98), 0.5);
    one_wrong.rows[1].y_mv -= 48.0;
    assert_eq!(outcomes(&run(&with(&[one_wrong])))[4], Outcome::HeldOut);
}

#[test]
fn a_single_check_far_off_counts_once_the_next_bears_it_out() {
    let jump = [check(9, 100.0, &[7.0], (-30.0, 0.98), 0.5)];
    let alone = run(&with(&jump));
    assert_eq!(outcomes(&alone)[4], Outcome::HeldOut);
    let borne_out = run(&with(&[
        jump[0].clone(),
        check(10, 107.0, &[7.0], (-31.0, 0.98), 0.5),
    ]));
    assert_eq!(
        outcomes(&borne_out)[4..],
        [Outcome::TakenAsJump, Outcome::Taken]
    );
    assert!(
        (borne_out
            .smoothed_at(after_days(103.0))
            .unwrap()
            .line()
            .offset_mv
            + 30.0)
            .abs()
            < 3.0
    );
    // What was said on day 103 stays what was known on day 103.
    assert_eq!(
        borne_out.filtered_at(after_days(103.0)),
        alone.filtered_at(after_days(103.0))
    );
}

#[test]
fn a_wrong_bottle_is_not_borne_out_by_a_right_one() {
    let track = run(&with(&[
        wrong_bottle(9, 100.0),
        check(10, 107.0, &[7.0], (2.0, 0.98), 0.5),
    ]));
    assert_eq!(outcomes(&track)[4..], [Outcome::HeldOut, Outcome::Taken]);
}

#[test]
fn a_poisoned_reference_is_believed_and_two_bottles_one_step_too_high_are_not() {
    // Tens of millivolts in both buffers alike.
    let poisoned = run(&with(&[check(9, 120.0, &[4.0, 7.0], (-70.0, 0.98), 0.5)]));
    assert_eq!(outcomes(&poisoned)[4], Outcome::TakenAsJump);
    // pH 7 and 10 read where 4 and 7 were entered: 174 mV in both alike.
    let shifted = run(&with(&[check(
        9,
        120.0,
        &[4.0, 7.0],
        (2.5 - 0.98 * 177.5, 0.98),
        0.5,
    )]));
    assert_eq!(outcomes(&shifted)[4], Outcome::HeldOut);
}
