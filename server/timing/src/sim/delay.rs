//! Distributions of a path's delay beyond its least.

use serde::{Deserialize, Serialize};

use super::random::Random;
use crate::normal::cdf;

/// Delay beyond the least, s. All but `Normal` are never negative before their normal part.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub enum Delay {
    /// No delay beyond the least.
    None,
    /// Normal around 0.
    Normal {
        /// Deviation, s.
        deviation_s: f64,
    },
    /// Normal, at times with an exponential tail, rarely 1 to 20 ms late.
    Tailed {
        /// Deviation of the normal part, s.
        deviation_s: f64,
        /// Share of readings with a tail.
        share: f64,
        /// Mean of the tail, s.
        tail_s: f64,
        /// Share of readings that are 1 to 20 ms late.
        outliers: f64,
    },
    /// Queues: gamma of the given shape, plus a normal part.
    Gamma {
        /// Shape, at least 1.
        shape: f64,
        /// Scale, s.
        scale_s: f64,
        /// Deviation of the normal part, s.
        deviation_s: f64,
    },
    /// Lognormal queues, plus a normal part.
    LogNormal {
        /// Median, s.
        median_s: f64,
        /// Deviation of the logarithm.
        spread: f64,
        /// Deviation of the normal part, s.
        deviation_s: f64,
    },
    /// Heavy-tailed queues (Lomax, also called Pareto II) that resemble the ones before.
    Lomax {
        /// Scale, s.
        scale_s: f64,
        /// Exponent of the tail, above zero.
        exponent: f64,
        /// Correlation from one reading to the next of the normal variable underneath.
        correlation: f64,
        /// Deviation of the normal part, s.
        deviation_s: f64,
    },
}

impl Delay {
    /// Draws a delay, s, with queues longer by a factor. `memory` is the correlated normal
    /// variable, kept by the path.
    pub(crate) fn draw(&self, random: &mut Random, memory: &mut f64, longer: f64) -> f64 {
        match *self {
            Delay::None => 0.0,
            Delay::Normal { deviation_s } => deviation_s * random.normal(),
            Delay::Tailed {
                deviation_s,
                share,
                tail_s,
                outliers,
            } => {
                let mut delay = deviation_s * random.normal();
                if random.chance(share) {
                    delay += longer * tail_s * random.exponential();
                }
                if random.chance(outliers) {
                    delay += random.between(1e-3, 20e-3);
                }
                delay
            }
            Delay::Gamma {
                shape,
                scale_s,
                deviation_s,
            } => longer * scale_s * random.gamma(shape) + deviation_s * random.normal(),
            Delay::LogNormal {
                median_s,
                spread,
                deviation_s,
            } => {
                let queue = median_s * libm::exp(spread * random.normal());
                longer * queue + deviation_s * random.normal()
            }
            Delay::Lomax {
                scale_s,
                exponent,
                correlation,
                deviation_s,
            } => {
                let fresh = (1.0 - correlation * correlation).sqrt() * random.normal();
                *memory = correlation * *memory + fresh;
                let above = cdf(-*memory).max(1e-12);
                let queue = scale_s * libm::expm1(-libm::log(above) / exponent);
                longer * queue + deviation_s * random.normal()
            }
        }
    }
}
