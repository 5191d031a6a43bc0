//! pKw of fresh water.

use halfcell::electrode::units::Celsius;
use halfcell::water::ionisation::pkw;

#[test]
fn pkw_is_that_of_the_handbooks_within_its_u() {
    // Source: Harned & Owen, as printed in handbooks (from memory), °C and pKw.
    let printed = [
        (0.0, 14.944),
        (5.0, 14.734),
        (10.0, 14.535),
        (15.0, 14.346),
        (20.0, 14.167),
        (25.0, 13.997),
        (30.0, 13.833),
        (40.0, 13.535),
        (50.0, 13.262),
    ];
    for (temp_c, expected) in printed {
        let got = pkw(Celsius::new(temp_c).unwrap(), 0.0).unwrap().figure;
        let off = (got.value - expected).abs();
        assert!(
            off <= got.u.max(0.0135),
            "{temp_c} °C: {} against {expected}",
            got.value
        );
    }
}

#[test]
fn pkw_by_the_expression_is_that_of_the_sheet() {
    // Source: Plummer & Busenberg 1982, computed elsewhere from the expression: 14.942, 14.000 and 13.275.
    for (temp_c, expected) in [(0.0, 14.942), (25.0, 14.000), (50.0, 13.275)] {
        let got = pkw(Celsius::new(temp_c).unwrap(), 0.0)
            .unwrap()
            .figure
            .value;
        assert!(
            (got - expected).abs() <= 0.000_5,
            "{temp_c} °C: {got} against {expected}"
        );
    }
}
