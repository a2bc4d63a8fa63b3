//! How a crossing stands, for people and metrics.

use ratewright_timing::Estimate;
use serde::{Deserialize, Serialize};

use crate::{Reference, Setting};

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
    /// further reading comes: the 95 % band alone is as wide. Absent as above.
    pub seconds_vouched: Option<f64>,
    /// The newest setting.
    pub setting: Option<Setting>,
    /// Settings made since the crossing was declared.
    pub settings_made: u64,
    /// Of these, the ones with another wanted ratio than the one before.
    pub changes_made: u64,
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
}
