//! Learning the error density from the errors themselves: online expectation maximisation.

use serde::{Deserialize, Serialize};

use crate::noise::{Detail, Noise};

/// Averages of what the parts of the density had to do with the errors so far.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) struct Learner {
    rows: u32,
    until_refresh: u32,
    shares: [f64; 3],
    flat: f64,
    excess: [f64; 2],
    normal_square: f64,
}

const PRIOR_ROWS: f64 = 16.0;
const LEAST_GAIN: f64 = 1.0 / 512.0;
const LEAST_WEIGHT: f64 = 0.002;

impl Learner {
    /// A learner that believes `noise` as if it had seen 16 rows of it.
    pub(crate) fn new(noise: &Noise) -> Self {
        let w = noise.weights;
        Learner {
            rows: 0,
            until_refresh: 4,
            shares: w,
            flat: noise.flat,
            excess: [w[1] * noise.tau[0], w[2] * noise.tau[1]],
            normal_square: (w[0] + w[1] + w[2]) * noise.sigma * noise.sigma,
        }
    }

    /// Takes one error's detail; true when it is time to [`Learner::refresh`].
    pub(crate) fn learn(&mut self, noise: &Noise, detail: &Detail) -> bool {
        let gain = (1.0 / (self.rows as f64 + PRIOR_ROWS)).max(LEAST_GAIN);
        let noise_var = noise.sigma * noise.sigma;
        let r = noise_var / detail.variance;
        let mut square = 0.0;
        for k in 0..3 {
            let share = detail.shares[k];
            self.shares[k] += gain * (share - self.shares[k]);
            square += share * (r * r * detail.normal_square[k] + noise_var * (1.0 - r));
        }
        for k in 0..2 {
            let excess = detail.shares[k + 1] * detail.excess[k];
            self.excess[k] += gain * (excess - self.excess[k]);
        }
        self.flat += gain * (detail.shares[4] - self.flat);
        self.normal_square += gain * (square - self.normal_square);
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
        let core: f64 = self.shares.iter().sum();
        let total = core + self.flat;
        let mut weights = self.shares.map(|share| (share / total).max(LEAST_WEIGHT));
        let flat = (self.flat / total).max(LEAST_WEIGHT);
        let sum: f64 = weights.iter().sum::<f64>() + flat;
        weights = weights.map(|w| w / sum);
        let sigma = (self.normal_square / core).max(0.0).sqrt().max(least_sigma);
        let mean = |k: usize| self.excess[k] / self.shares[k + 1].max(1e-9);
        let first = mean(0).max(0.3 * sigma);
        let second = mean(1).max(3.0 * sigma).max(2.0 * first);
        Noise {
            sigma,
            tau: [first, second],
            weights,
            flat: flat / sum,
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
        };
        let again = Learner::new(&noise).refresh(1e-4);
        assert!((again.sigma - noise.sigma).abs() < 1e-12);
        assert!((again.tau[1] - noise.tau[1]).abs() < 1e-9);
    }
}
