//! What the audio thread has to know of a setting.

use std::fmt;

use ratewright_ratio::{Exact, LazyError, TargetError};
use thiserror::Error;

use crate::Realised;

/// The place of a setting among those of its crossing: a later epoch is newer whatever the number.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub struct SettingNumber {
    /// Grows when a store was restored from a backup.
    pub epoch: u64,
    /// Grows with each setting, through epochs too.
    pub number: u64,
}

impl fmt::Display for SettingNumber {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.pad(&format!("{}-{}", self.epoch, self.number))
    }
}

/// A setting and its instant.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Cue {
    /// Which setting.
    pub number: SettingNumber,
    /// What to run.
    pub realised: Realised,
    /// House time of the effect, ns: the first block end at or after it.
    pub effect_ns: i64,
    /// House time after which the reader calls itself expired, ns.
    pub expiry_ns: i64,
}

/// Why a setting was not armed. What was armed before stays.
#[derive(Clone, Copy, Debug, PartialEq, Error)]
pub enum ArmError {
    /// It is not newer than one that was armed before.
    #[error("number is {number}; accepted is what is newer than {newest}")]
    NotNewer {
        /// The refused number.
        number: SettingNumber,
        /// The newest that was armed.
        newest: SettingNumber,
    },
    /// A swing that is no positive number.
    #[error("swing_samples: {0}")]
    Swing(TargetError),
    /// A swing that the two ratios cannot keep.
    #[error(
        "swing_samples is {swing_samples}; accepted is at least {least}, the error bound of the cadence"
    )]
    SwingTooSmall {
        /// The refused swing, output samples.
        swing_samples: f64,
        /// The cadence's error bound, output samples.
        least: Exact,
    },
}

impl ArmError {
    pub(crate) fn swing(swing_samples: f64, error: LazyError) -> Self {
        let least = match error {
            LazyError::HeadroomTooSmall { least, .. } => least,
            // Only for states that were saved.
            LazyError::Saved { .. } => Exact::from_integer(0),
        };
        Self::SwingTooSmall {
            swing_samples,
            least,
        }
    }
}
