//! What holds whatever the figures.

use crate::exact;
use halfcell::electrode::convert::Converted;
use halfcell::water::ammonia::{unionized_ammonia_n_mg_l, unionized_fraction};
use halfcell::water::carbonate::free_co2_mg_l;
use halfcell::water::ionisation::pkw;
use halfcell::water::{Derived, Liquid, NotValid};
use proptest::prelude::*;

fn known(ph: f64, u_ph: f64, temp_c: f64, u_temp_c: f64, s: f64) -> Liquid {
    Liquid {
        ph: Converted { value: ph, u: u_ph },
        u_temp_c,
        ..exact(ph, temp_c, s)
    }
}

/// A standard normal draw from two numbers of a fixed sequence.
fn draws(n: usize) -> impl Iterator<Item = [f64; 3]> {
    let mut state = 0x9E37_79B9_7F4A_7C15_u64;
    let mut uniform = move || {
        state ^= state << 13;
        state ^= state >> 7;
        state ^= state << 17;
        #[expect(clippy::cast_precision_loss, reason = "53 bits")]
        let x = (state >> 11) as f64 / (1_u64 << 53) as f64;
        x.max(1e-300)
    };
    let mut normal =
        move || (-2.0 * uniform().ln()).sqrt() * (std::f64::consts::TAU * uniform()).cos();
    (0..n).map(move |_| [normal(), normal(), normal()])
}

/// u of a figure without the method's own part, by drawing the inputs 200 000 times (GUM, JCGM 101:2008).
fn monte_carlo(figure: impl Fn([f64; 3]) -> f64) -> f64 {
    let values: Vec<f64> = draws(200_000).map(figure).collect();
    #[expect(clippy::cast_precision_loss, reason = "a count")]
    let n = values.len() as f64;
    let mean = values.iter().sum::<f64>() / n;
    2.0 * (values.iter().map(|v| (v - mean).powi(2)).sum::<f64>() / n).sqrt()
}

/// The same figure's stated u with the part of the method taken out.
fn without_method(stated: &Derived, of_method: f64) -> f64 {
    (stated.figure.u.powi(2) - of_method.powi(2)).sqrt()
}

#[test]
fn u_of_ammonia_is_that_of_drawn_inputs() {
    for s in [0.0, 28.0] {
        let (ph, u_ph, c, u_c, n, u_n) = (7.9, 0.04, 18.0, 0.2, 0.8, 0.03);
        let stated = unionized_ammonia_n_mg_l(&known(ph, u_ph, c, u_c, s), (n, u_n)).unwrap();
        let f = unionized_fraction(&exact(ph, c, s)).unwrap().figure.value;
        let u_model = if s > 0.0 { 0.12 } else { 0.05 } * f * (1.0 - f) * n;
        let drawn = monte_carlo(|[a, b, d]| {
            let liquid = exact(ph + a * u_ph / 2.0, c + b * u_c, s);
            unionized_fraction(&liquid).unwrap().figure.value * (n + d * u_n)
        });
        let off = without_method(&stated, u_model) / drawn - 1.0;
        assert!(off.abs() < 0.02, "S {s}: {off}");
    }
}

#[test]
fn u_of_carbon_dioxide_is_that_of_drawn_inputs() {
    for s in [0.0, 12.0, 33.0] {
        let (ph, u_ph, c, u_c, alk, u_alk) = (7.2, 0.04, 14.0, 0.2, 1.8, 0.05);
        let stated = free_co2_mg_l(&known(ph, u_ph, c, u_c, s), (alk, u_alk)).unwrap();
        let u_model = if s >= 5.0 { 0.12 } else { 0.05 } * stated.figure.value;
        let drawn = monte_carlo(|[a, b, d]| {
            let liquid = exact(ph + a * u_ph / 2.0, c + b * u_c, s);
            free_co2_mg_l(&liquid, (alk + d * u_alk, 0.0))
                .unwrap()
                .figure
                .value
        });
        let off = without_method(&stated, u_model) / drawn - 1.0;
        assert!(off.abs() < 0.02, "S {s}: {off}");
    }
}

#[test]
fn outside_its_source_each_figure_is_an_error_that_says_so() {
    let refused = |what: Result<Derived, NotValid>, word: &str| {
        let said = what.unwrap_err().to_string();
        assert!(said.contains(word) && said.contains("outside"), "{said}");
    };
    refused(
        unionized_fraction(&exact(8.0, 51.0, 0.0)),
        "temperature 51 °C",
    );
    refused(
        unionized_fraction(&exact(8.0, 41.0, 20.0)),
        "temperature 41 °C",
    );
    refused(
        unionized_fraction(&exact(8.0, 20.0, 41.0)),
        "salinity 41 g/kg",
    );
    refused(unionized_fraction(&exact(11.1, 20.0, 0.0)), "pH 11.1");
    refused(
        unionized_ammonia_n_mg_l(&exact(8.0, 20.0, 0.0), (-0.1, 0.0)),
        "total ammonia -0.1",
    );
    refused(free_co2_mg_l(&exact(9.6, 20.0, 0.0), (2.0, 0.0)), "pH 9.6");
    refused(free_co2_mg_l(&exact(4.9, 20.0, 0.0), (2.0, 0.0)), "pH 4.9");
    refused(
        free_co2_mg_l(&exact(7.0, 20.0, 0.0), (0.05, 0.0)),
        "alkalinity 0.05",
    );
    refused(
        free_co2_mg_l(&exact(7.0, 20.0, 46.0), (2.0, 0.0)),
        "salinity 46",
    );
    refused(
        free_co2_mg_l(&exact(9.5, 30.0, 35.0), (0.1, 0.0)),
        "free CO2",
    );
    refused(pkw(exact(7.0, 50.5, 0.0).temp, 0.1), "temperature 50.5");
}

proptest! {
    #[test]
    fn ammonia_rises_with_ph_and_temperature_and_u_is_sound(
        ph in 5.0..10.5f64, c in 1.0..39.0f64, s in prop_oneof![Just(0.0), 1.0..40.0f64], u_ph in 0.0..0.5f64,
    ) {
        let f = |ph: f64, c: f64| unionized_fraction(&known(ph, u_ph, c, 0.2, s)).unwrap().figure;
        prop_assert!(f(ph + 0.05, c).value > f(ph, c).value);
        prop_assert!(f(ph, c + 0.5).value > f(ph, c).value);
        let here = f(ph, c);
        prop_assert!((0.0..=1.0).contains(&here.value) && here.u > 0.0 && here.u.is_finite());
        let wider = unionized_fraction(&known(ph, u_ph + 0.1, c, 0.2, s)).unwrap().figure.u;
        prop_assert!(wider > here.u);
    }

    #[test]
    fn carbon_dioxide_falls_with_ph_rises_with_alkalinity_and_u_is_sound(
        ph in 5.5..8.4f64, c in 1.0..40.0f64, s in prop_oneof![Just(0.0), 5.0..42.0f64], alk in 0.5..8.0f64,
    ) {
        let co2 = |ph: f64, alk: f64| free_co2_mg_l(&known(ph, 0.04, c, 0.2, s), (alk, 0.05)).map(|d| d.figure);
        if let (Ok(here), Ok(above), Ok(more)) = (co2(ph, alk), co2(ph + 0.05, alk), co2(ph, alk * 1.1)) {
            prop_assert!(above.value < here.value);
            prop_assert!(more.value > here.value);
            prop_assert!(here.u > 0.0 && here.u.is_finite());
        }
    }
}
