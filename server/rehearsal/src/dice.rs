//! Seeded randomness that can be asked out of order.
//!
//! Every draw is a pure function of a key and an index, so that skipping a week of readings costs
//! nothing and a draw never depends on how many were taken before it. The mixing is the finaliser of
//! SplitMix64 (Steele, Lea and Flood, "Fast splittable pseudorandom number generators", 2014).

use core::f64::consts::TAU;

const GOLDEN: u64 = 0x9E37_79B9_7F4A_7C15;

/// A family of independent draws, addressed by index.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) struct Dice {
    key: u64,
}

impl Dice {
    /// The draws of a seed.
    pub(crate) fn new(seed: u64) -> Self {
        Self {
            key: mix(seed.wrapping_add(GOLDEN)),
        }
    }

    /// An independent family, named by a lane.
    pub(crate) fn lane(self, lane: u64) -> Self {
        Self {
            key: mix(self.key ^ mix(lane.wrapping_mul(GOLDEN).wrapping_add(1))),
        }
    }

    /// An independent family, named in words: the same words give the same draws whatever else is declared.
    pub(crate) fn named(self, name: &str) -> Self {
        name.bytes()
            .fold(self, |dice, byte| dice.lane(u64::from(byte)))
    }

    /// 64 random bits: a seed for something that draws by itself.
    pub(crate) fn bits(self, index: u64) -> u64 {
        mix(self.key.wrapping_add(index.wrapping_mul(GOLDEN)))
    }

    /// Uniform over (0, 1), both ends left out, so that its logarithm is finite.
    pub(crate) fn uniform(self, index: u64) -> f64 {
        let bits = self.bits(index) >> 11;
        (bits as f64 + 0.5) * (1.0 / (1_u64 << 53) as f64)
    }

    /// Normal with mean 0 and deviation 1 (Box and Muller, 1958).
    pub(crate) fn normal(self, index: u64) -> f64 {
        let radius = (-2.0 * libm::log(self.lane(1).uniform(index))).sqrt();
        radius * libm::cos(TAU * self.lane(2).uniform(index))
    }

    /// Exponential with mean 1.
    pub(crate) fn exponential(self, index: u64) -> f64 {
        -libm::log(self.uniform(index))
    }
}

fn mix(mut z: u64) -> u64 {
    z = (z ^ (z >> 30)).wrapping_mul(0xBF58_476D_1CE4_E5B9);
    z = (z ^ (z >> 27)).wrapping_mul(0x94D0_49BB_1331_11EB);
    z ^ (z >> 31)
}

#[cfg(test)]
mod tests {
    use super::*;

    const DRAWS: u64 = 100_000;

    fn moments(draw: impl Fn(u64) -> f64) -> (f64, f64) {
        let n = DRAWS as f64;
        let mean = (0..DRAWS).map(&draw).sum::<f64>() / n;
        let variance = (0..DRAWS)
            .map(|i| (draw(i) - mean) * (draw(i) - mean))
            .sum::<f64>()
            / n;
        (mean, variance)
    }

    /// Bounds are five standard errors of the sample mean and of the sample variance.
    #[test]
    fn moments_are_those_of_the_distributions() {
        let dice = Dice::new(7).named("moments");
        let root = (DRAWS as f64).sqrt();
        for (draw, mean, variance, fourth) in [
            (
                Box::new(move |i| dice.uniform(i)) as Box<dyn Fn(u64) -> f64>,
                0.5,
                1.0 / 12.0,
                1.0 / 80.0,
            ),
            (Box::new(move |i| dice.normal(i)), 0.0, 1.0, 3.0),
            (Box::new(move |i| dice.exponential(i)), 1.0, 1.0, 9.0),
        ] {
            let (m, v) = moments(draw);
            assert!(
                (m - mean).abs() < 5.0 * f64::sqrt(variance) / root,
                "mean {m}, expected {mean}"
            );
            let error = f64::sqrt(fourth - variance * variance) / root;
            assert!(
                (v - variance).abs() < 5.0 * error,
                "variance {v}, expected {variance}"
            );
        }
    }

    #[test]
    fn neighbouring_lanes_and_seeds_do_not_agree() {
        let a = Dice::new(1).named("kiln");
        for other in [
            Dice::new(2).named("kiln"),
            Dice::new(1).named("loom"),
            a.lane(0),
            a.lane(1),
        ] {
            let n = DRAWS as f64;
            let product = (0..DRAWS)
                .map(|i| a.normal(i) * other.normal(i))
                .sum::<f64>()
                / n;
            assert!(product.abs() < 5.0 / n.sqrt(), "correlation {product}");
        }
    }
}
