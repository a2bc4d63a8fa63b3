//! How a crossing stands, for people and metrics.

use std::fmt;

use ratewright_ratio::Bounds;
use ratewright_timing::Estimate;
use serde::{Deserialize, Serialize};

use crate::{HouseNs, Id, Reference, Setting};

/// State of a crossing.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub enum CrossingState {
    /// A clock of it was never measured: it runs at the nominal ratio.
    Waiting,
    /// The phase error is kept within the headroom, as far as is known.
    Holding,
    /// The phase error cannot be vouched for: it is too uncertain, or on its way back.
    Degraded,
    /// No ratio within the bounds can hold it; the nearest is served.
    OutOfBounds,
}

/// A crossing at an instant.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct CrossingStatus {
    /// Its state.
    pub state: CrossingState,
    /// Why, in words and numbers.
    pub reason: String,
    /// Target: true sink rate over true source rate.
    pub target: f64,
    /// Lower end of the target's 95 % interval.
    pub target_low: f64,
    /// Upper end of the target's 95 % interval.
    pub target_high: f64,
    /// What the newest setting is off by now: its average over the target,
    /// minus 1; positive fills the sink's
    /// buffer. ([`Setting::residual`] is what it was off by when it was decided.)
    pub residual: Option<f64>,
    /// Phase error, sink samples.
    pub phase_error_samples: f64,
    /// Standard deviation of the phase error, sink samples.
    pub phase_deviation_samples: f64,
    /// Forecast: seconds until the 95 % band of the phase error first leaves the headroom; absent
    /// if it does not within [`crate::SLIP_HORIZON_S`].
    pub seconds_to_slip: Option<f64>,
    /// Seconds until the phase error can no longer be kept within the headroom however it is set, if no
    /// further reading comes: the 95 % band alone is as wide. While it is pinned nothing is set, so this is
    /// [`CrossingStatus::seconds_to_slip`] then. Absent as above.
    pub seconds_vouched: Option<f64>,
    /// Clock of the source in use: the declared one or the backup.
    pub source: Id,
    /// Who pinned it and why, if it is pinned.
    pub pin: Option<Pin>,
    /// Smallest bounds that would do, if it is out of bounds and there are any.
    pub needed: Option<Bounds>,
    /// The newest setting.
    pub setting: Option<Setting>,
    /// Settings made since the crossing was declared.
    pub settings_made: u64,
    /// Of these, the ones with another wanted ratio than the one before.
    pub changes_made: u64,
}

/// A crossing is pinned: what it runs stays.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct Pin {
    /// Who pinned it.
    pub by: String,
    /// Since when.
    pub since_ns: HouseNs,
    /// Why, in the operator's words; may be empty.
    pub note: String,
}

/// What is wrong with a clock that is measured. Its text names it in words and numbers.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub enum ClockFault {
    /// Its timestamps run at another rate than its samples come in: the samples count.
    ForeignTimestamps {
        /// Drift of the timestamps, dimensionless.
        timestamps: f64,
        /// Drift of the samples as delivered, dimensionless.
        samples: f64,
        /// Standard deviation of their difference.
        deviation: f64,
    },
    /// A follower that plays out at it counts its samples at another rate than its readings say.
    CountedOtherwise {
        /// Drift by the follower's count, dimensionless.
        counted: f64,
        /// Drift by its readings, dimensionless.
        estimated: f64,
        /// Standard deviation of their difference.
        deviation: f64,
    },
}

impl fmt::Display for ClockFault {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            ClockFault::ForeignTimestamps {
                timestamps,
                samples,
                deviation,
            } => write!(
                f,
                "its timestamps come from another clock than its samples: they run at {:+.4} ppm and the \
                 samples at {:+.4} ppm, {:.4} ± {:.4} ppm apart; the samples count",
                timestamps * 1e6,
                samples * 1e6,
                (timestamps - samples).abs() * 1e6,
                deviation * 1e6
            ),
            ClockFault::CountedOtherwise {
                counted,
                estimated,
                deviation,
            } => write!(
                f,
                "a follower counts its samples at {:+.4} ppm, and its readings say {:+.4} ppm, {:.4} ± {:.4} ppm \
                 apart",
                counted * 1e6,
                estimated * 1e6,
                (counted - estimated).abs() * 1e6,
                deviation * 1e6
            ),
        }
    }
}

/// A clock at an instant: its estimate against house time, and where that comes from.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct ClockEstimate {
    /// The estimate against house time.
    pub estimate: Estimate,
    /// Reference of the readings it rests on; absent for an exact clock and one never measured.
    pub reference: Option<Reference>,
    /// Probe of these readings.
    pub probe: Option<String>,
    /// True if there are readings all the way to house time, or the clock is exact.
    pub measured: bool,
    /// What is wrong with it, if anything is.
    pub fault: Option<ClockFault>,
}
