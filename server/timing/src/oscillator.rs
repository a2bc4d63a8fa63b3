//! Priors by kind of oscillator.

use serde::{Deserialize, Serialize};

/// Kind of oscillator behind a clock: what may be believed before measuring, and how far the
/// drift may wander.
///
/// The tolerances are common practice, without a source that was read; they set priors only,
/// and measurements overrule them.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Serialize, Deserialize)]
pub enum Oscillator {
    /// Uncompensated crystal in a device or computer: usually within ±100 ppm over temperature
    /// and age (common practice).
    #[default]
    Crystal,
    /// Temperature-compensated crystal: within a few ppm (common practice).
    Compensated,
    /// Oven-controlled crystal: within 0.1 ppm or so after warm-up, years of ageing included
    /// up to 1 ppm (common practice).
    Oven,
    /// Rubidium or caesium: within 1e-9 (common practice).
    Atomic,
}

impl Oscillator {
    /// Standard deviation of the drift before anything is measured, ppm.
    pub(crate) fn prior_deviation_ppm(self) -> f64 {
        match self {
            Oscillator::Crystal => 60.0,
            Oscillator::Compensated => 5.0,
            Oscillator::Oven => 1.0,
            Oscillator::Atomic => 0.01,
        }
    }

    /// Factor on the variances of wander and temperature, against a plain crystal's.
    pub(crate) fn wander_scale(self) -> f64 {
        match self {
            Oscillator::Crystal => 1.0,
            Oscillator::Compensated => 3e-2,
            Oscillator::Oven => 1e-4,
            Oscillator::Atomic => 1e-7,
        }
    }
}
