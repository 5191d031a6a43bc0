//! The published proration against worked figures of our own after USGS Techniques and Methods 1-D3 (2006; the rules from memory).

use crate::support::{after_days, line};
use halfcell::electrode::ageing::proration::{
    AsFound, CRITERION_PH, Correction, Rating, fouling_error, prorated_line,
};
use halfcell::electrode::convert::{Inputs, to_ph};
use halfcell::electrode::units::{Celsius, Millivolts, Timestamp};

fn close(what: &str, got: f64, want: f64, within: f64) {
    assert!(
        (got - want).abs() <= within,
        "{what}: {got} instead of {want} ± {within}"
    );
}

/// Minutes after 2025-03-03T08:00Z.
fn minute(n: i64) -> Timestamp {
    Timestamp::from_ms(1_740_988_800_000 + n * 60_000)
}

#[test]
fn one_point_correction_as_worked() {
    let fouling = fouling_error([7.62, 7.74], [7.80, 7.82]);
    close("E_f", fouling, 0.10, 1e-9);
    let buffer = AsFound {
        standard: 7.02,
        reading: 6.90,
    };
    close("E_d", buffer.drift_error(), 0.12, 1e-9);
    let correction = Correction::new(minute(0), minute(14 * 1440), fouling, &[buffer]);
    assert!(correction.is_needed(CRITERION_PH));
    for (at, recorded, part, fouling, drift, corrected, rating) in [
        (0, 7.410, 0.0, 0.0, 0.0, 7.4100, Rating::Excellent),
        (
            3 * 1440 + 720,
            7.455,
            0.25,
            0.025,
            0.03,
            7.5100,
            Rating::Excellent,
        ),
        (7 * 1440, 7.380, 0.5, 0.05, 0.06, 7.4900, Rating::Excellent),
        (
            10 * 1440 + 720,
            7.502,
            0.75,
            0.075,
            0.09,
            7.6670,
            Rating::Excellent,
        ),
        (
            12 * 1440 + 1020,
            7.530,
            0.907_738,
            0.0908,
            0.1089,
            7.7297,
            Rating::Excellent,
        ),
        (
            12 * 1440 + 1080,
            7.530,
            0.910_714,
            0.0911,
            0.1093,
            7.7304,
            Rating::Good,
        ),
        (14 * 1440, 7.620, 1.0, 0.1, 0.12, 7.8400, Rating::Good),
    ] {
        let got = correction.at(minute(at), recorded);
        close("w", got.part, part, 5e-7);
        close("fouling", got.fouling, fouling, 5.1e-5);
        close("drift", got.drift, drift, 5.1e-5);
        close("corrected", got.value, corrected, 5.1e-5);
        assert_eq!(got.rating, rating, "{at} min");
    }
}

#[test]
fn the_rating_leaves_excellent_at_the_second_worked_out() {
    // w = 0.2/0.22 of fourteen days: 2025-03-16T01:27:16Z.
    let buffer = AsFound {
        standard: 7.02,
        reading: 6.90,
    };
    let correction = Correction::new(minute(0), minute(14 * 1440), 0.10, &[buffer]);
    let leaves = minute(12 * 1440 + 17 * 60 + 27).plus_ms(16_000);
    assert_eq!(correction.at(leaves, 7.53).rating, Rating::Excellent);
    assert_eq!(
        correction.at(leaves.plus_ms(1_000), 7.53).rating,
        Rating::Good
    );
}

#[test]
fn three_buffers_as_worked() {
    let buffers = [(4.00, 4.06), (7.00, 6.94), (10.01, 9.83)]
        .map(|(standard, reading)| AsFound { standard, reading });
    let correction = Correction::new(after_days(0.0), after_days(10.0), 0.04, &buffers);
    assert!(correction.is_needed(CRITERION_PH));
    for (w, recorded, full, corrected, sum, rating) in [
        (0.5, 3.50, -0.060_00, 3.4900, 0.0500, Rating::Excellent),
        (0.5, 5.00, -0.020_83, 5.0096, 0.0304, Rating::Excellent),
        (0.5, 8.20, 0.112_32, 8.2762, 0.0762, Rating::Excellent),
        (1.0, 3.50, -0.060_00, 3.4800, 0.1000, Rating::Excellent),
        (1.0, 5.00, -0.020_83, 5.0192, 0.0608, Rating::Excellent),
        (1.0, 6.94, 0.060_00, 7.0400, 0.1000, Rating::Excellent),
        (1.0, 8.20, 0.112_32, 8.3523, 0.1523, Rating::Excellent),
        (1.0, 9.83, 0.180_00, 10.0500, 0.2200, Rating::Good),
        (1.0, 10.40, 0.180_00, 10.6200, 0.2200, Rating::Good),
    ] {
        let got = correction.at(after_days(10.0 * w), recorded);
        close("drift_full", got.drift / w, full, 5.1e-6);
        close("corrected", got.value, corrected, 5.1e-5);
        close("sum", got.fouling.abs() + got.drift.abs(), sum, 5.1e-5);
        assert_eq!(got.rating, rating);
    }
}

#[test]
fn offset_and_slope_prorated_as_worked() {
    let (left, found) = (line(3.0, 0.985), line(-5.4, 0.951));
    let exact = Inputs {
        u_mv: 0.0,
        u_temp_c: 0.0,
        u_junction: 0.0,
    };
    for (w, mv, temp_c, value, offset_mv, slope, best) in [
        (0.00, -62.0, 20.0, 8.1345, 3.000, 0.985_00, 8.1345),
        (0.25, -62.0, 20.0, 8.1345, 0.900, 0.976_50, 8.1074),
        (0.50, -62.0, 20.0, 8.1345, -1.200, 0.968_00, 8.0798),
        (0.75, 118.0, 12.0, 4.9365, -3.300, 0.959_50, 4.7656),
        (1.00, 118.0, 12.0, 4.9365, -5.400, 0.951_00, 4.7066),
        (1.00, 0.0, 25.0, 7.0515, -5.400, 0.951_00, 6.9040),
    ] {
        let (mv, t) = (Millivolts::new(mv).unwrap(), Celsius::new(temp_c).unwrap());
        let prorated = prorated_line(&left, &found, w);
        close("offset", prorated.offset_mv, offset_mv, 5e-10);
        close("slope", prorated.slope, slope, 5e-10);
        close(
            "value",
            to_ph(mv, t, &left, 7.0, &exact).unwrap().value,
            value,
            5.1e-5,
        );
        close(
            "best",
            to_ph(mv, t, &prorated, 7.0, &exact).unwrap().value,
            best,
            5.1e-5,
        );
    }
}

#[test]
fn equal_to_the_criterion_is_not_greater_than_it() {
    // 0.08 + 0.12 is 0.20 in decimal and a little more or less in binary.
    let buffer = AsFound {
        standard: 7.02,
        reading: 6.90,
    };
    let correction =
        |fouling| Correction::new(after_days(0.0), after_days(1.0), fouling, &[buffer]);
    assert!(!correction(0.08).is_needed(CRITERION_PH));
    assert!(correction(0.09).is_needed(CRITERION_PH));
    // Two errors that cancel still ask for correction: the absolute values are summed.
    assert!(correction(-0.12).is_needed(CRITERION_PH));
}

#[test]
fn ratings_change_just_above_their_limits() {
    for (sum, rating) in [
        (0.2, Rating::Excellent),
        (0.201, Rating::Good),
        (0.5, Rating::Good),
        (0.501, Rating::Fair),
        (0.8, Rating::Fair),
        (0.801, Rating::Poor),
        (2.0, Rating::Poor),
        (2.001, Rating::ConsiderDeletion),
    ] {
        assert_eq!(Rating::of_ph(sum), rating, "{sum}");
    }
}
