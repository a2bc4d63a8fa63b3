//! How uncertainty grows when nothing more is measured.

use serde::{Deserialize, Serialize};

use crate::growth::Growth;

/// Growth of the uncertainty of drift and phase from an estimate's instant on, in SI units.
///
/// A composed estimate carries one part for every link it is made of; their variances add.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Forecast {
    parts: Vec<Part>,
}

/// One link's contribution: µs, ppm and seconds inside.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) struct Part {
    /// Time since the last reading, s: growth is counted from there.
    pub(crate) age_s: f64,
    /// Variance of the drift at the last reading, ppm².
    pub(crate) drift_var: f64,
    /// White frequency noise, µs²/s.
    pub(crate) white_fm: f64,
    /// Growth of the drift's variance.
    pub(crate) growth: Growth,
}

/// Nodes and weights of 8-point Gauss–Legendre quadrature on (0, 1).
const GAUSS: [(f64, f64); 8] = [
    (0.019_855_071_751_231_856, 0.050_614_268_145_188_13),
    (0.101_666_761_293_186_64, 0.111_190_517_226_687_24),
    (0.237_233_795_041_835_5, 0.156_853_322_938_943_63),
    (0.408_282_678_752_175_1, 0.181_341_891_689_181),
    (0.591_717_321_247_825, 0.181_341_891_689_181),
    (0.762_766_204_958_164_5, 0.156_853_322_938_943_63),
    (0.898_333_238_706_813_4, 0.111_190_517_226_687_24),
    (0.980_144_928_248_768_1, 0.050_614_268_145_188_13),
];

impl Part {
    fn drift_variance_ppm2(&self, horizon_s: f64) -> f64 {
        self.drift_var + self.growth.variance(self.age_s + horizon_s)
    }

    /// Variance of ∫₀^τ of the drift's error. With stationary increments of variance D the
    /// error e(h) has Cov(e(s), e(u)) = (D(s) + D(u) − D(|s − u|))/2, so the integral over
    /// (a, a+τ) has variance τ∫D(a+v)dv − ∫(τ−v)D(v)dv, both over (0, τ).
    fn phase_variance_us2(&self, tau_s: f64) -> f64 {
        let integral: f64 = GAUSS
            .iter()
            .map(|(node, weight)| {
                let v = node * tau_s;
                let fresh = self.growth.variance(v);
                let ahead = if self.age_s > 0.0 {
                    self.growth.variance(self.age_s + v)
                } else {
                    fresh
                };
                weight * (ahead - (1.0 - node) * fresh)
            })
            .sum();
        let wander = (tau_s * tau_s * integral).max(0.0);
        self.drift_var * tau_s * tau_s + self.white_fm * tau_s + wander
    }
}

impl Forecast {
    pub(crate) fn exact() -> Self {
        Forecast { parts: Vec::new() }
    }

    pub(crate) fn of(part: Part) -> Self {
        Forecast { parts: vec![part] }
    }

    pub(crate) fn plus(&self, other: &Forecast) -> Self {
        Forecast {
            parts: self.parts.iter().chain(&other.parts).copied().collect(),
        }
    }

    /// Variance of the drift `horizon_s` from now, dimensionless.
    pub(crate) fn drift_variance(&self, horizon_s: f64) -> f64 {
        1e-12
            * self
                .parts
                .iter()
                .map(|p| p.drift_variance_ppm2(horizon_s))
                .sum::<f64>()
    }

    /// Variance of the phase gained over `tau_s`, s².
    pub(crate) fn phase_variance_s2(&self, tau_s: f64) -> f64 {
        1e-12
            * self
                .parts
                .iter()
                .map(|p| p.phase_variance_us2(tau_s))
                .sum::<f64>()
    }
}
