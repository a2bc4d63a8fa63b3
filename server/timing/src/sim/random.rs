//! Random numbers from a seed: xoshiro256++ (Blackman and Vigna), seeded by SplitMix64
//! (Steele, Lea and Flood), both written from their published algorithms.

use serde::{Deserialize, Serialize};

/// A seeded generator. The same seed gives the same numbers anywhere.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct Random {
    state: [u64; 4],
}

impl Random {
    /// A generator from a seed; any seed will do.
    pub fn new(seed: u64) -> Self {
        let mut sum = seed;
        let state = [(); 4].map(|()| {
            sum = sum.wrapping_add(0x9e37_79b9_7f4a_7c15);
            let mut z = sum;
            z = (z ^ (z >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
            z = (z ^ (z >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
            z ^ (z >> 31)
        });
        Random { state }
    }

    /// The next 64 bits.
    pub fn bits(&mut self) -> u64 {
        let s = &mut self.state;
        let result = s[0].wrapping_add(s[3]).rotate_left(23).wrapping_add(s[0]);
        let shifted = s[1] << 17;
        s[2] ^= s[0];
        s[3] ^= s[1];
        s[1] ^= s[2];
        s[0] ^= s[3];
        s[2] ^= shifted;
        s[3] = s[3].rotate_left(45);
        result
    }

    /// Uniform in the open interval (0, 1), 53 bits.
    pub fn uniform(&mut self) -> f64 {
        ((self.bits() >> 11) as f64 + 0.5) * (1.0 / (1u64 << 53) as f64)
    }

    /// Uniform between two values.
    pub fn between(&mut self, low: f64, high: f64) -> f64 {
        low + (high - low) * self.uniform()
    }

    /// True with the given probability.
    pub fn chance(&mut self, probability: f64) -> bool {
        self.uniform() < probability
    }

    /// Normal, mean 0 and deviation 1 (Box and Muller; the second value is not kept).
    pub fn normal(&mut self) -> f64 {
        let radius = (-2.0 * libm::log(self.uniform())).sqrt();
        radius * libm::cos(core::f64::consts::TAU * self.uniform())
    }

    /// Exponential, mean 1.
    pub fn exponential(&mut self) -> f64 {
        -libm::log(self.uniform())
    }

    /// Gamma of the given shape (≥ 1) and scale 1, by Marsaglia and Tsang's rejection.
    pub fn gamma(&mut self, shape: f64) -> f64 {
        let d = shape.max(1.0) - 1.0 / 3.0;
        let c = 1.0 / (9.0 * d).sqrt();
        loop {
            let x = self.normal();
            let v = (1.0 + c * x) * (1.0 + c * x) * (1.0 + c * x);
            if v > 0.0 && libm::log(self.uniform()) < 0.5 * x * x + d - d * v + d * libm::log(v) {
                return d * v;
            }
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn moments_are_those_of_the_distributions() {
        let mut random = Random::new(1);
        let n = 200_000;
        let mean = |f: &mut dyn FnMut() -> f64| (0..n).map(|_| f()).sum::<f64>() / n as f64;
        assert!((mean(&mut || random.uniform()) - 0.5).abs() < 0.003);
        let mut random = Random::new(2);
        let square = mean(&mut || {
            let x = random.normal();
            x * x
        });
        assert!((square - 1.0).abs() < 0.015);
        let mut random = Random::new(3);
        assert!((mean(&mut || random.gamma(2.5)) - 2.5).abs() < 0.02);
    }

    #[test]
    fn seeds_give_their_own_sequences_and_always_the_same() {
        assert_eq!(Random::new(5).bits(), Random::new(5).bits());
        assert_ne!(Random::new(5).bits(), Random::new(6).bits());
    }
}
