//! # Chance that can be asked again: the same seed and number give the same figure, in any order

use std::f64::consts::TAU;

/// Number `n` of the splitmix64 sequence that starts at `seed` (0 is the first).
///
/// - **Source** Steele, Lea and Flood (2014), "Fast splittable pseudorandom number generators", OOPSLA (from memory).
pub fn bits_at(seed: u64, n: i64) -> u64 {
    let mut z = seed.wrapping_add(
        n.cast_unsigned()
            .wrapping_add(1)
            .wrapping_mul(0x9E37_79B9_7F4A_7C15),
    );
    z = (z ^ (z >> 30)).wrapping_mul(0xBF58_476D_1CE4_E5B9);
    z = (z ^ (z >> 27)).wrapping_mul(0x94D0_49BB_1331_11EB);
    z ^ (z >> 31)
}

/// A figure from 0 (included) to 1 (not included), evenly spread.
#[expect(clippy::cast_precision_loss, reason = "53 bits fit an f64 exactly")]
pub fn uniform_at(seed: u64, n: i64) -> f64 {
    (bits_at(seed, n) >> 11) as f64 / (1u64 << 53) as f64
}

/// A figure of the standard normal distribution (mean 0, standard deviation 1).
///
/// - **Source** Box and Muller (1958), "A note on the generation of random normal deviates", Ann. Math. Stat. 29, 610 (from memory).
pub fn normal_at(seed: u64, n: i64) -> f64 {
    let radius = (-2.0 * (1.0 - uniform_at(seed, n)).ln()).sqrt();
    radius * (TAU * uniform_at(!seed, n)).cos()
}

/// A smooth curve through a standard normal figure at every whole `x`.
pub fn smooth_at(seed: u64, x: f64) -> f64 {
    let whole = x.floor();
    #[expect(
        clippy::cast_possible_truncation,
        reason = "x counts hours or days of some centuries"
    )]
    let n = whole as i64;
    let part = x - whole;
    let weight = part * part * (3.0 - 2.0 * part);
    normal_at(seed, n) * (1.0 - weight) + normal_at(seed, n + 1) * weight
}

/// A random walk of about one unit per square root of a day, over spans of up to some months; it can be asked at any day.
///
/// A true walk must be summed from its beginning; this sum of ever slower and larger curves grows alike and needs no beginning.
pub fn walk_at(seed: u64, days: f64) -> f64 {
    let mut sum = 0.0;
    let (mut period, mut octave) = (1.0_f64, 0);
    while octave < 8 {
        sum += 0.5 * period.sqrt() * smooth_at(bits_at(seed, octave), days / period);
        period *= 2.0;
        octave += 1;
    }
    sum
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_sequence_is_the_published_one() {
        // Source: reference implementation of splitmix64 (Vigna, 2015), first outputs for seed 1234567, from memory.
        let published = [
            6_457_827_717_110_365_317,
            3_203_168_211_198_807_973,
            9_817_491_932_198_370_423,
        ];
        assert_eq!([0, 1, 2].map(|n| bits_at(1_234_567, n)), published);
    }

    #[test]
    fn normal_figures_have_mean_nought_and_deviation_one() {
        let n = 20_000;
        let (mut sum, mut squares) = (0.0, 0.0);
        for i in 0..n {
            let x = normal_at(7, i);
            sum += x;
            squares += x * x;
        }
        let n = 20_000.0;
        // Four standard errors: 4/√n for the mean, 4·√(2/n) for the variance.
        assert!((sum / n).abs() < 0.0283, "mean {}", sum / n);
        assert!((squares / n - 1.0).abs() < 0.04, "variance {}", squares / n);
    }

    #[test]
    fn a_walk_spreads_with_the_root_of_the_time() {
        for (days, least, most) in [(1.0, 0.5, 2.0), (7.0, 3.5, 14.0), (28.0, 14.0, 56.0)] {
            let n: u32 = 2_000;
            let variance = (0..n)
                .map(|seed| walk_at(seed.into(), 100.3 + days) - walk_at(seed.into(), 100.3))
                .map(|step| step * step)
                .sum::<f64>()
                / f64::from(n);
            assert!(
                (least..most).contains(&variance),
                "variance {variance} over {days} days"
            );
        }
    }
}
