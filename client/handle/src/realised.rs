//! What a resampler is to run.

use ratewright_ratio::{Cadence, Exact, Fraction, Stepping, exact};

/// What a resampler is to run.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Realised {
    /// One ratio.
    Single(Fraction),
    /// Two ratios in turn at block ends.
    Cadence(Cadence),
    /// One table of phases, and two advances in turn at each output.
    Stepping(Stepping),
    /// Two ratios, each held until the running error would leave the swing.
    Lazy {
        /// The two ratios.
        cadence: Cadence,
        /// Largest running error at any block end, either way, output samples.
        swing_samples: f64,
    },
}

impl Realised {
    /// The long-run average of what is run.
    pub fn average(&self) -> Exact {
        match self {
            Self::Single(ratio) => exact(ratio),
            Self::Cadence(cadence) | Self::Lazy { cadence, .. } => *cadence.wanted(),
            Self::Stepping(stepping) => stepping.wanted(),
        }
    }
}
