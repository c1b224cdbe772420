//! The generator: xoshiro256++, filled by SplitMix64.

use crate::accumulate::count;

/// A reproducible stream of random numbers.
#[derive(Debug, Clone)]
pub struct Random {
    state: [u64; 4],
    /// The second normal value of the last pair.
    spare: Option<f64>,
}

impl Random {
    /// The stream of a seed: the same seed gives the same stream for ever.
    pub fn from_seed(seed: u64) -> Self {
        let mut counter = seed;
        let state = std::array::from_fn(|_| split_mix(&mut counter));
        Self { state, spare: None }
    }

    /// The stream that goes on from a state of the generator.
    #[cfg(test)]
    pub(super) const fn from_state(state: [u64; 4]) -> Self {
        Self { state, spare: None }
    }

    #[cfg(test)]
    pub(super) const fn state_for_test(&self) -> [u64; 4] {
        self.state
    }

    /// The next 64 bits.
    pub const fn bits(&mut self) -> u64 {
        let [s0, s1, s2, s3] = self.state;
        let result = s0.wrapping_add(s3).rotate_left(23).wrapping_add(s0);
        let (s2, s3) = (s2 ^ s0, s3 ^ s1);
        let (s1, s0) = (s1 ^ s2, s0 ^ s3);
        let s2 = s2 ^ (self.state[1] << 17);
        self.state = [s0, s1, s2, s3.rotate_left(45)];
        result
    }

    /// A value within 0 to 1, both ends excluded, in steps of 2^-53.
    #[expect(
        clippy::cast_precision_loss,
        reason = "the shift leaves the 53 bits that a float holds"
    )]
    pub fn unit(&mut self) -> f64 {
        ((self.bits() >> 11) as f64 + 0.5) / (1_u64 << 53) as f64
    }

    /// A value of the standard normal distribution (Marsaglia's polar method,
    /// SIAM Review 6 (1964) 260).
    pub fn normal(&mut self) -> f64 {
        if let Some(spare) = self.spare.take() {
            return spare;
        }
        loop {
            let (x, y) = (2.0 * self.unit() - 1.0, 2.0 * self.unit() - 1.0);
            let square = x * x + y * y;
            if square > 0.0 && square < 1.0 {
                let factor = (-2.0 * square.ln() / square).sqrt();
                self.spare = Some(y * factor);
                return x * factor;
            }
        }
    }

    /// A value of the chi-square distribution (Marsaglia and Tsang, ACM TOMS 26
    /// (2000) 363). The degrees of freedom must be above zero.
    pub fn chi_square(&mut self, freedom: f64) -> f64 {
        let shape = freedom / 2.0;
        // Below one the method runs at shape + 1 and is brought back by a power.
        let (shape, boost) = if shape < 1.0 {
            (shape + 1.0, self.unit().powf(1.0 / shape))
        } else {
            (shape, 1.0)
        };
        let d = shape - 1.0 / 3.0;
        let c = 1.0 / (9.0 * d).sqrt();
        loop {
            let normal = self.normal();
            let v = (1.0 + c * normal).powi(3);
            if v <= 0.0 {
                continue;
            }
            if self.unit().ln() < 0.5 * normal * normal + d * (1.0 - v + v.ln()) {
                return 2.0 * d * v * boost;
            }
        }
    }

    /// A whole number below a bound (of at most 2^53); 0 for a bound of 0.
    pub fn below(&mut self, bound: usize) -> usize {
        let index = super::whole((self.unit() * count(bound)).floor());
        index.min(bound.saturating_sub(1))
    }
}

const fn split_mix(counter: &mut u64) -> u64 {
    *counter = counter.wrapping_add(0x9E37_79B9_7F4A_7C15);
    let z = *counter;
    let z = (z ^ (z >> 30)).wrapping_mul(0xBF58_476D_1CE4_E5B9);
    let z = (z ^ (z >> 27)).wrapping_mul(0x94D0_49BB_1331_11EB);
    z ^ (z >> 31)
}
