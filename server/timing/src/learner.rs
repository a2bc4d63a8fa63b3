//! Learning the error density from the errors themselves: online expectation maximisation.

use serde::{Deserialize, Serialize};

use crate::noise::{Burst, Detail, Noise};

/// Averages of what the parts of the density had to do with the errors so far.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) struct Learner {
    rows: u16,
    until_refresh: u16,
    shares: [f32; 3],
    flat: f32,
    excess: [f32; 2],
    normal_square: f32,
}

const PRIOR_ROWS: f64 = 16.0;
const LEAST_GAIN: f64 = 1.0 / 512.0;
const LEAST_WEIGHT: f64 = 0.002;

/// One step of a running mean.
fn blend(mean: &mut f32, value: f64, gain: f64) {
    let old = f64::from(*mean);
    *mean = (old + gain * (value - old)) as f32;
}

impl Learner {
    /// A learner that believes `noise` as if it had seen 16 rows of it.
    pub(crate) fn new(noise: &Noise) -> Self {
        let w = noise.weights;
        Learner {
            rows: 0,
            until_refresh: 4,
            shares: w.map(|w| w as f32),
            flat: noise.flat as f32,
            excess: [w[1] * noise.tau[0], w[2] * noise.tau[1]].map(|excess| excess as f32),
            normal_square: ((w[0] + w[1] + w[2]) * noise.sigma * noise.sigma) as f32,
        }
    }

    /// Rows taken, as far as they are counted.
    pub(crate) fn rows(&self) -> u16 {
        self.rows
    }

    /// Takes one error's detail; true when it is time to [`Learner::refresh`].
    pub(crate) fn learn(&mut self, noise: &Noise, detail: &Detail) -> bool {
        // A row that belongs to a burst says nothing of the ordinary density.
        let calm = (1.0 - detail.shares[5]).max(1e-9);
        let gain = calm * (1.0 / (f64::from(self.rows) + PRIOR_ROWS)).max(LEAST_GAIN);
        let shares = detail.shares.map(|share| share / calm);
        let noise_var = noise.sigma * noise.sigma;
        let r = noise_var / detail.variance;
        let mut square = 0.0;
        for (k, mean) in self.shares.iter_mut().enumerate() {
            let share = shares[k];
            blend(mean, share, gain);
            square += share * (r * r * detail.normal_square[k] + noise_var * (1.0 - r));
        }
        for (k, mean) in self.excess.iter_mut().enumerate() {
            blend(mean, shares[k + 1] * detail.excess[k], gain);
        }
        blend(&mut self.flat, shares[4], gain);
        blend(&mut self.normal_square, square, gain);
        self.rows = self.rows.saturating_add(1);
        self.until_refresh -= 1;
        if self.until_refresh > 0 {
            return false;
        }
        self.until_refresh = (self.rows / 8).clamp(4, 64);
        true
    }

    /// The density that the averages speak for; its normal part not below `least_sigma`, µs.
    pub(crate) fn refresh(&self, least_sigma: f64) -> Noise {
        let shares = self.shares.map(f64::from);
        let core: f64 = shares.iter().sum();
        let total = core + f64::from(self.flat);
        let mut weights = shares.map(|share| (share / total).max(LEAST_WEIGHT));
        let flat = (f64::from(self.flat) / total).max(LEAST_WEIGHT);
        let sum: f64 = weights.iter().sum::<f64>() + flat;
        weights = weights.map(|w| w / sum);
        let variance = f64::from(self.normal_square) / core;
        let sigma = variance.max(0.0).sqrt().max(least_sigma);
        let mean = |k: usize| f64::from(self.excess[k]) / shares[k + 1].max(1e-9);
        let first = mean(0).max(0.3 * sigma);
        let second = mean(1).max(3.0 * sigma).max(2.0 * first);
        Noise {
            sigma,
            tau: [first, second],
            weights,
            flat: flat / sum,
            burst: Burst::NONE,
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_first_refresh_of_no_evidence_is_the_prior() {
        let noise = Noise {
            sigma: 5.0,
            tau: [9.0, 45.0],
            weights: [0.5, 0.37, 0.12],
            flat: 0.01,
            burst: Burst::NONE,
        };
        let again = Learner::new(&noise).refresh(1e-4);
        assert!((again.sigma - noise.sigma).abs() < 1e-6);
        assert!((again.tau[1] - noise.tau[1]).abs() < 1e-5);
    }
}
