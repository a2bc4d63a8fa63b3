//! Clocks and crossings: how they are declared and how they stand.

use num_rational::Ratio;
use ratewright_ratio::Bounds;

use crate::{Id, Reference, Setting};

/// A clock as it is declared.
#[derive(Clone, Debug, PartialEq)]
pub struct ClockDeclaration {
    /// Its id.
    pub id: Id,
    /// For people; may be empty.
    pub display_name: String,
    /// Ticks per second of house time at drift 0.
    pub nominal_hz: Ratio<u64>,
    /// True if its drift is 0 by definition.
    pub exact: bool,
    /// Largest |drift| the maker declares, ppm.
    pub tolerance_ppm: Option<f64>,
}

/// A clock and what its readings say.
#[derive(Clone, Debug, PartialEq)]
pub struct Clock {
    /// How it is declared.
    pub declaration: ClockDeclaration,
    /// What is known of it.
    pub estimate: Estimate,
}

/// How good an estimate is (terms of ITU-T G.810 and G.781).
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum EstimateState {
    /// Never measured, or known no better than 10 ppm.
    FreeRunning,
    /// Measured, not yet locked.
    Acquiring,
    /// Known within ±0.1 ppm.
    Locked,
    /// Measurements have stopped; the interval grows.
    Holdover,
}

/// The drift of a clock and how well it is known.
#[derive(Clone, Debug, PartialEq)]
pub struct Estimate {
    /// How good it is.
    pub state: EstimateState,
    /// Fractional frequency offset from nominal against house time; positive runs fast.
    pub drift: f64,
    /// Standard deviation of `drift`.
    pub deviation: f64,
    /// Lower end of the 95 % interval of `drift`.
    pub drift_low: f64,
    /// Upper end of the 95 % interval of `drift`.
    pub drift_high: f64,
    /// Clock minus house time since the first reading, ns; positive if the clock has gained.
    pub phase_ns: f64,
    /// House time this speaks of.
    pub as_of_ns: i64,
    /// House time of the newest reading used; `None` if there was none.
    pub last_reading_ns: Option<i64>,
    /// Readings used so far.
    pub readings_used: u64,
    /// Readings set aside as outliers so far.
    pub readings_set_aside: u64,
    /// Seconds until it is expected to lock, if that can be said.
    pub lock_expected_seconds: Option<f64>,
    /// What it rests on; `None` if there was no reading.
    pub reference: Option<Reference>,
}

impl Estimate {
    /// Half the width of the 95 % interval, dimensionless.
    pub fn half_width(&self) -> f64 {
        (self.drift_high - self.drift_low) / 2.0
    }
}

/// A crossing as it is declared.
#[derive(Clone, Debug, PartialEq)]
pub struct CrossingDeclaration {
    /// Its id.
    pub id: Id,
    /// For people; may be empty.
    pub display_name: String,
    /// Clock of the samples that enter the resampler.
    pub source: Id,
    /// Clock of the samples that leave it.
    pub sink: Id,
    /// Largest L and M of the filter bank.
    pub bounds: Bounds,
    /// Hard limit of the phase error, both ways, sink samples.
    pub headroom_samples: f64,
    /// What the resampler can do.
    pub realisation: Realisation,
    /// Crossings of a group change at the same house instant.
    pub group: Option<Id>,
    /// Time from a decision to its effect, ns.
    pub lead_ns: i64,
    /// Longest time a setting is trusted unrenewed, ns.
    pub review_horizon_ns: i64,
}

/// What a resampler can do to reach a ratio that its bank does not hold.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Realisation {
    /// One L/M only.
    Single,
    /// Two L/M in turn at block ends.
    Cadence,
}

/// A crossing and how it fares.
#[derive(Clone, Debug, PartialEq)]
pub struct Crossing {
    /// How it is declared.
    pub declaration: CrossingDeclaration,
    /// How it fares.
    pub status: CrossingStatus,
}

/// How a crossing fares.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum CrossingState {
    /// A clock of it has not been measured yet.
    Waiting,
    /// The forecast keeps the phase error inside the headroom.
    Holding,
    /// The forecast leaves the headroom before the review, or a clock is in holdover.
    Degraded,
    /// The bounds hold nothing that keeps the phase error inside the headroom.
    OutOfBounds,
}

/// The status of a crossing at a house instant.
#[derive(Clone, Debug, PartialEq)]
pub struct CrossingStatus {
    /// State.
    pub state: CrossingState,
    /// Why, in words.
    pub reason: String,
    /// House time this speaks of.
    pub as_of_ns: i64,
    /// The target ratio f_sink (1 + y_sink) / (f_source (1 + y_source)).
    pub target: f64,
    /// Lower end of its 95 % interval.
    pub target_low: f64,
    /// Upper end of its 95 % interval.
    pub target_high: f64,
    /// Phase error since the crossing was centred, sink samples; positive fills a buffer after the
    /// resampler.
    pub phase_error_samples: f64,
    /// Its standard deviation, sink samples.
    pub phase_deviation_samples: f64,
    /// Seconds until the 95 % band of the phase error leaves the headroom; `None` if not within
    /// a day.
    pub seconds_to_slip: Option<f64>,
    /// Seconds until the phase error can no longer be kept within the headroom, however it is set, if no
    /// further reading comes; `None` if not within a day.
    pub seconds_vouched: Option<f64>,
    /// The setting in force or on its way.
    pub setting: Option<Setting>,
    /// Settings made so far.
    pub settings_made: u64,
    /// What the newest setting is off by now: its average over the target, minus 1; positive
    /// fills the sink's buffer; 0 if there is none.
    pub residual: f64,
}
