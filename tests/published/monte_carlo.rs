//! The analytic uncertainties against brute force: a million draws and more of the same inputs, the same model, another way.
//! Source of the method: JCGM 101:2008 (propagation of distributions by a Monte Carlo method). Deterministic: the seed is fixed.

use super::calibration::{cases, figure, readings};
use super::{assert_close, celsius};
use halfcell::electrode::convert::{Inputs, to_ph};
use halfcell::electrode::fit::{Limits, fit};
use halfcell::electrode::history::{ElectrodeLine, StandardReading};
use halfcell::electrode::slope::nernst_slope;
use halfcell::electrode::units::Millivolts;

const DRAWS: usize = 1_000_000;

/// Normal deviates: a 64-bit xorshift generator (Marsaglia 2003, J. Stat. Softw. 8(14)) with the star multiplier, and Box & Muller (1958).
struct Normal {
    state: u64,
    spare: Option<f64>,
}

impl Normal {
    fn new(seed: u64) -> Self {
        Self {
            state: seed,
            spare: None,
        }
    }

    #[expect(clippy::cast_precision_loss, reason = "53 bits fit")]
    fn uniform(&mut self) -> f64 {
        self.state ^= self.state >> 12;
        self.state ^= self.state << 25;
        self.state ^= self.state >> 27;
        ((self.state.wrapping_mul(0x2545_F491_4F6C_DD1D) >> 11) as f64 + 0.5)
            / 9_007_199_254_740_992.0
    }

    fn next(&mut self) -> f64 {
        if let Some(spare) = self.spare.take() {
            return spare;
        }
        let (radius, angle) = (
            (-2.0 * self.uniform().ln()).sqrt(),
            std::f64::consts::TAU * self.uniform(),
        );
        self.spare = Some(radius * angle.sin());
        radius * angle.cos()
    }
}

/// Mean and standard deviation of a million draws.
#[expect(clippy::cast_precision_loss, reason = "a million")]
fn spread(mut draw: impl FnMut() -> f64) -> (f64, f64) {
    let first = draw();
    let (mut sum, mut squares) = (0.0, 0.0);
    for _ in 0..DRAWS {
        let from_first = draw() - first;
        sum += from_first;
        squares += from_first * from_first;
    }
    let n = DRAWS as f64;
    (
        first + sum / n,
        ((squares - sum * sum / n) / (n - 1.0)).sqrt(),
    )
}

#[test]
fn a_million_draws_of_the_inputs_spread_as_u_says() {
    let mut normal = Normal::new(20_260_302);
    let inputs = Inputs {
        u_mv: 0.8,
        u_temp_c: 0.6,
        u_junction: 0.012,
    };
    let line = ElectrodeLine {
        offset_mv: -6.0,
        slope: 0.955,
        var_offset_mv2: 0.9 * 0.9,
        var_slope: 0.006 * 0.006,
        // Correlation −0.6.
        cov_mv: -0.6 * 0.9 * 0.006,
    };
    for (mv, temp_c) in [(150.0, 5.0), (-6.0, 25.0), (-180.0, 60.0), (-310.0, 31.5)] {
        let stated = to_ph(
            Millivolts::new(mv).unwrap(),
            celsius(temp_c),
            &line,
            7.0,
            &inputs,
        )
        .unwrap();
        let (_, sd) = spread(|| {
            let (a, b) = (normal.next(), normal.next());
            let offset = line.offset_mv + 0.9 * a;
            let slope = line.slope + 0.006 * (-0.6 * a + 0.8 * b);
            let k = 0.198_421_431_110_922_4 * (temp_c + inputs.u_temp_c * normal.next() + 273.15);
            7.0 - (mv + inputs.u_mv * normal.next() - offset) / (slope * k)
                + inputs.u_junction * normal.next()
        });
        assert_close(
            &format!("u_c at {mv} mV, {temp_c} °C"),
            stated.u / 2.0 / sd,
            1.0,
            0.02,
        );
    }
}

#[test]
fn a_million_calibrations_spread_as_the_covariance_says() {
    let case = &cases()[1];
    let points = readings(case);
    let limits = Limits::default();
    let stated = fit(&points, figure(case, "ph_iso"), None, &limits)
        .unwrap()
        .line;
    let (mut normal, mut normal_again) = (Normal::new(4_711), Normal::new(4_711));
    let k: Vec<f64> = points
        .iter()
        .map(|p| nernst_slope(celsius(p.temp_c)).mv_per_ph())
        .collect();
    // A straight line through two points, written out here: nothing of the fit's own code.
    let line = |normal: &mut Normal| {
        let mut draw = |p: &StandardReading, k: f64| {
            let dt = p.u_temp_c * normal.next();
            let t = p.temp_c + 273.15;
            let ph = p.value + p.u_value * normal.next() + p.value_per_c * dt;
            (k * (t + dt) / t * (7.0 - ph), p.mv + p.u_mv * normal.next())
        };
        let ((x0, y0), (x1, y1)) = (draw(&points[0], k[0]), draw(&points[1], k[1]));
        let slope = (y1 - y0) / (x1 - x0);
        (y0 - slope * x0, slope)
    };
    let (offset, sd_offset) = spread(|| line(&mut normal).0);
    let (slope, sd_slope) = spread(|| line(&mut normal_again).1);
    assert_close("offset", offset, stated.offset_mv, 0.005);
    assert_close("slope", slope, stated.slope, 2e-5);
    assert_close(
        "u of the offset",
        stated.var_offset_mv2.sqrt() / sd_offset,
        1.0,
        0.02,
    );
    assert_close(
        "u of the slope",
        stated.var_slope.sqrt() / sd_slope,
        1.0,
        0.02,
    );
    // The covariance shows in the spread of a sum of both: 200 mV·slope + offset.
    let mut normal = Normal::new(4_711);
    let (_, sd_sum) = spread(|| {
        let (offset, slope) = line(&mut normal);
        offset + 200.0 * slope
    });
    let stated_sum = stated.var_offset_mv2 + 40_000.0 * stated.var_slope + 400.0 * stated.cov_mv;
    assert_close("u of the sum", stated_sum.sqrt() / sd_sum, 1.0, 0.02);
}
