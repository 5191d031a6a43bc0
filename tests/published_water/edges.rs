//! Where each source begins and ends, and every part of every u, to the digit.

use crate::exact;
use halfcell::electrode::convert::Converted;
use halfcell::water::ammonia::{unionized_ammonia_n_mg_l, unionized_fraction};
use halfcell::water::carbonate::free_co2_mg_l;
use halfcell::water::ionisation::pkw;
use halfcell::water::{Derived, Liquid, NotValid};

/// A source's edge belongs to it; a hundredth beyond does not.
#[track_caller]
fn edge(what: &str, edge: f64, outwards: f64, made: impl Fn(f64) -> Result<Derived, NotValid>) {
    assert!(made(edge).is_ok(), "{what}: {edge} is refused");
    assert!(
        made(edge + 0.01 * outwards).is_err(),
        "{what}: beyond {edge} is taken"
    );
}

#[test]
fn each_range_ends_where_its_source_says() {
    let ammonia = |ph, c, s| unionized_fraction(&exact(ph, c, s));
    edge("Emerson, cold", 0.0, -1.0, |c| ammonia(8.0, c, 0.0));
    edge("Emerson, warm", 50.0, 1.0, |c| ammonia(8.0, c, 0.0));
    edge("EPA, cold", 0.0, -1.0, |c| ammonia(8.0, c, 20.0));
    edge("EPA, warm", 40.0, 1.0, |c| ammonia(8.0, c, 20.0));
    edge("EPA, salt", 40.0, 1.0, |s| ammonia(8.0, 20.0, s));
    edge("ammonia, acid", 4.0, -1.0, |ph| ammonia(ph, 20.0, 0.0));
    edge("ammonia, alkaline", 11.0, 1.0, |ph| ammonia(ph, 20.0, 0.0));
    let total = |n| unionized_ammonia_n_mg_l(&exact(8.0, 20.0, 0.0), (n, 0.0));
    edge("total ammonia", 100.0, 1.0, total);
    edge("total ammonia", 0.0, -1.0, total);
    let co2 = |ph, c, s, alk| free_co2_mg_l(&exact(ph, c, s), (alk, 0.0));
    edge("CO2, acid", 5.0, -1.0, |ph| co2(ph, 20.0, 0.0, 2.0));
    edge("CO2, alkaline", 9.5, 1.0, |ph| co2(ph, 20.0, 0.0, 2.0));
    edge("CO2, cold", 0.0, -1.0, |c| co2(7.0, c, 0.0, 2.0));
    edge("CO2, warm", 50.0, 1.0, |c| co2(7.0, c, 0.0, 2.0));
    edge("CO2, salt", 45.0, 1.0, |s| co2(7.0, 20.0, s, 2.0));
    edge("alkalinity, least", 0.1, -1.0, |alk| {
        co2(7.0, 20.0, 0.0, alk)
    });
    edge("alkalinity, most", 50.0, 1.0, |alk| {
        co2(7.0, 20.0, 0.0, alk)
    });
    edge("pKw, cold", 0.0, -1.0, |c| {
        pkw(exact(7.0, c, 0.0).temp, 0.0)
    });
    edge("pKw, warm", 50.0, 1.0, |c| {
        pkw(exact(7.0, c, 0.0).temp, 0.0)
    });
}

#[test]
fn the_method_changes_where_it_is_said_to() {
    let ammonia = |s| unionized_fraction(&exact(8.0, 20.0, s)).unwrap().method;
    assert_eq!([0.499, 0.5].map(ammonia), ["Emerson 1975", "EPA 1989"]);
    let co2 = |(s, c)| free_co2_mg_l(&exact(7.5, c, s), (2.0, 0.0)).unwrap().method;
    let (fresh, lueker, millero) = ("Plummer", "Lueker", "Millero");
    for ((s, c), begins) in [
        ((4.99, 20.0), fresh),
        ((5.0, 20.0), millero),
        ((18.99, 20.0), millero),
        ((19.0, 20.0), lueker),
        ((43.0, 20.0), lueker),
        ((43.01, 20.0), millero),
        ((30.0, 1.99), millero),
        ((30.0, 2.0), lueker),
        ((30.0, 35.0), lueker),
        ((30.0, 35.01), millero),
    ] {
        let method = co2((s, c));
        assert!(method.starts_with(begins), "S {s}, {c} °C: {method}");
    }
}

/// The u that one input alone brings, next to twice the figure's central difference over it (GUM, JCGM 100:2008, eq. 10).
#[track_caller]
fn part(what: &str, with: &Derived, without: &Derived, by_difference: f64) {
    let stated = (with.figure.u.powi(2) - without.figure.u.powi(2)).sqrt();
    let off = stated / by_difference.abs() - 1.0;
    assert!(
        off.abs() < 1e-4,
        "{what}: {stated} stated, {by_difference} by difference"
    );
}

fn known(ph: f64, u_ph: f64, c: f64, u_c: f64, s: f64) -> Liquid {
    Liquid {
        ph: Converted { value: ph, u: u_ph },
        u_temp_c: u_c,
        ..exact(ph, c, s)
    }
}

#[test]
fn every_part_of_ammonias_u_is_its_partial_derivative() {
    for s in [0.0, 30.0] {
        let (ph, c, n) = (9.0, 22.0, 0.8);
        let made = |u_ph, u_c, u_n| {
            unionized_ammonia_n_mg_l(&known(ph, u_ph, c, u_c, s), (n, u_n)).unwrap()
        };
        let at = |ph, c, n| {
            unionized_ammonia_n_mg_l(&exact(ph, c, s), (n, 0.0))
                .unwrap()
                .figure
                .value
        };
        let none = made(0.0, 0.0, 0.0);
        // u_ph is expanded already; the others are standard uncertainties and count twice.
        let slope = (at(ph + 1e-4, c, n) - at(ph - 1e-4, c, n)) / 2e-4;
        part("pH", &made(0.1, 0.0, 0.0), &none, 0.1 * slope);
        let slope = (at(ph, c + 1e-3, n) - at(ph, c - 1e-3, n)) / 2e-3;
        part(
            "temperature",
            &made(0.0, 0.5, 0.0),
            &none,
            2.0 * 0.5 * slope,
        );
        part(
            "total",
            &made(0.0, 0.0, 0.1),
            &none,
            2.0 * 0.1 * at(ph, c, 1.0),
        );
        let f = at(ph, c, 1.0);
        let of_method = if s > 0.0 { 0.12 } else { 0.05 } * f * (1.0 - f) * n;
        assert!(
            (none.figure.u - of_method).abs() < 1e-12,
            "S {s}: {} {of_method}",
            none.figure.u
        );
    }
}

#[test]
fn every_part_of_carbon_dioxides_u_is_its_partial_derivative() {
    for s in [0.0, 10.0, 33.0] {
        let (ph, c, alk) = (7.4, 16.0, 2.2);
        let made = |u_ph, u_c, u_a| free_co2_mg_l(&known(ph, u_ph, c, u_c, s), (alk, u_a)).unwrap();
        let at = |ph, c, alk| {
            free_co2_mg_l(&exact(ph, c, s), (alk, 0.0))
                .unwrap()
                .figure
                .value
        };
        let none = made(0.0, 0.0, 0.0);
        let slope = (at(ph + 0.01, c, alk) - at(ph - 0.01, c, alk)) / 0.02;
        part("pH", &made(0.1, 0.0, 0.0), &none, 0.1 * slope);
        let slope = (at(ph, c + 0.01, alk) - at(ph, c - 0.01, alk)) / 0.02;
        part(
            "temperature",
            &made(0.0, 0.5, 0.0),
            &none,
            2.0 * 0.5 * slope,
        );
        let slope = (at(ph, c, alk + 0.02) - at(ph, c, alk - 0.02)) / 0.04;
        part("alkalinity", &made(0.0, 0.0, 0.2), &none, 2.0 * 0.2 * slope);
        let of_method = if s >= 5.0 { 0.12 } else { 0.05 } * none.figure.value;
        assert!(
            (none.figure.u - of_method).abs() < 1e-12,
            "S {s}: {} {of_method}",
            none.figure.u
        );
    }
}

#[test]
fn every_part_of_pkws_u_is_its_partial_derivative() {
    for c in [5.0, 25.0, 45.0] {
        let at = |c| pkw(exact(7.0, c, 0.0).temp, 0.0).unwrap();
        let with = pkw(exact(7.0, c, 0.0).temp, 0.5).unwrap();
        let slope = (at(c + 1e-3).figure.value - at(c - 1e-3).figure.value) / 2e-3;
        part("temperature", &with, &at(c), 2.0 * 0.5 * slope);
        assert!((at(c).figure.u - 0.01).abs() < 1e-12);
    }
}
