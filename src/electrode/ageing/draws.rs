//! # Random figures that are the same every time: the seed is an argument
//!
//! Source: the generator of Steele, Lea and Flood (OOPSLA 2014, constants from memory); normal by Box and Muller (1958).

/// A stream of random figures.
#[derive(Debug, Clone)]
pub struct Draws {
    state: u64,
    spare: Option<f64>,
}

impl Draws {
    /// A stream that depends on the seed alone.
    pub const fn new(seed: u64) -> Self {
        Self {
            state: seed,
            spare: None,
        }
    }

    fn next(&mut self) -> u64 {
        self.state = self.state.wrapping_add(0x9E37_79B9_7F4A_7C15);
        let mut z = self.state;
        z = (z ^ (z >> 30)).wrapping_mul(0xBF58_476D_1CE4_E5B9);
        z = (z ^ (z >> 27)).wrapping_mul(0x94D0_49BB_1331_11EB);
        z ^ (z >> 31)
    }

    /// Evenly spread over 0 to 1, never 0.
    pub fn uniform(&mut self) -> f64 {
        #[expect(clippy::cast_precision_loss, reason = "53 bits fit")]
        let bits = ((self.next() >> 11) + 1) as f64;
        bits / 9_007_199_254_740_992.0
    }

    /// Normal of mean 0 and standard deviation 1.
    pub fn normal(&mut self) -> f64 {
        if let Some(spare) = self.spare.take() {
            return spare;
        }
        let radius = (-2.0 * self.uniform().ln()).sqrt();
        let (sin, cos) = (std::f64::consts::TAU * self.uniform()).sin_cos();
        self.spare = Some(radius * sin);
        radius * cos
    }
}
