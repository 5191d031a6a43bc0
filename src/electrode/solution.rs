//! # pH referred to 25 °C: a second figure beside the pH at temperature, never in its place
//!
//! Compensation corrects the electrode's slope; the liquid's own pH moves with temperature all the same. With the liquid's coefficient known,
//! what it would be at 25 °C can be told, under a name of its own.

use super::convert::Converted;
use super::units::Celsius;

/// How the pH of one liquid moves with its temperature.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct SolutionCoefficient {
    /// Change per °C, pH; from −0.03 (ammonia-dosed) over −0.017 (pure water; ASTM D5128, from memory) to about 0.
    pub per_c: f64,
    /// Its standard uncertainty (k = 1), pH per °C.
    pub u_per_c: f64,
}

/// A pH referred to 25 °C. Its type keeps it from standing where a pH at temperature belongs.
///
/// ```compile_fail
/// use halfcell::electrode::{convert::Converted, solution::PhAt25};
/// fn wants_ph_at_temperature(_: Converted) {}
/// wants_ph_at_temperature(PhAt25(Converted { value: 7.0, u: 0.02 }));
/// ```
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct PhAt25(pub Converted);

/// What `ph`, read at temperature `t` (standard uncertainty `u_temp_c`), would be at 25 °C: `pH − α·(t − 25)`.
///
/// u (k = 2) takes in that of the pH, of the coefficient and of the temperature, as independent (GUM, JCGM 100:2008, equation 10). A straight
/// line is assumed: good for some 10 °C either side of 25 °C.
pub fn ph_at_25(
    ph: Converted,
    t: Celsius,
    u_temp_c: f64,
    coefficient: SolutionCoefficient,
) -> PhAt25 {
    let from_25 = t.c() - Celsius::STANDARD.c();
    PhAt25(Converted {
        value: ph.value - coefficient.per_c * from_25,
        u: ph
            .u
            .hypot(2.0 * from_25 * coefficient.u_per_c)
            .hypot(2.0 * coefficient.per_c * u_temp_c),
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn pure_water_read_at_15_degrees_is_0_17_lower_at_25() {
        // Source: practice sheet, section 3: pure water moves by −0.017 pH per °C (computed from pKw/2).
        let water = SolutionCoefficient {
            per_c: -0.017,
            u_per_c: 0.001,
        };
        let read = Converted {
            value: 7.17,
            u: 0.04,
        };
        let PhAt25(at_25) = ph_at_25(read, Celsius::new(15.0).unwrap(), 0.2, water);
        assert!((at_25.value - 7.00).abs() < 1e-12, "{at_25:?}");
        // √(0.04² + (2·10·0.001)² + (2·0.017·0.2)²) = 0.045236, by hand.
        assert!((at_25.u - 0.045_236).abs() < 1e-6, "{at_25:?}");
    }

    #[test]
    fn at_25_degrees_nothing_moves() {
        let any = SolutionCoefficient {
            per_c: -0.03,
            u_per_c: 0.01,
        };
        let read = Converted {
            value: 8.2,
            u: 0.03,
        };
        let PhAt25(same) = ph_at_25(read, Celsius::STANDARD, 0.0, any);
        assert_eq!(same, read);
    }
}
