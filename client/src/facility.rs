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
    /// Kind of its oscillator: what is believed before it is measured.
    pub oscillator: Option<Oscillator>,
    /// Which way its one-way readings err when they are not punctual.
    pub tail: Option<LatencyTail>,
    /// Known step of its counter or of its timestamps, ns, 1 to 10^9.
    pub quantum_ns: Option<i64>,
    /// True if stability statistics of it are to be kept.
    pub statistics: bool,
}

impl ClockDeclaration {
    /// A clock of which nothing but the nominal rate, Hz, is declared.
    pub fn new(id: Id, nominal_hz: Ratio<u64>) -> Self {
        Self {
            id,
            display_name: String::new(),
            nominal_hz,
            exact: false,
            tolerance_ppm: None,
            oscillator: None,
            tail: None,
            quantum_ns: None,
            statistics: false,
        }
    }
}

/// Kinds of oscillators. The tolerances are common practice.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Oscillator {
    /// Uncompensated crystal: within 100 ppm or so.
    Crystal,
    /// Temperature-compensated crystal: within a few ppm.
    Compensated,
    /// Oven-controlled crystal: within 1 ppm, years of ageing included.
    Oven,
    /// Rubidium or caesium: within 1e-9.
    Atomic,
}

/// Which of the two sides of a one-way reading comes late when it is not punctual.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum LatencyTail {
    /// The reference is read late after the counter, or the report arrives late.
    ReferenceLate,
    /// The counter is read late after the reference.
    CounterLate,
}

/// A clock and what its readings say.
#[derive(Clone, Debug, PartialEq)]
pub struct Clock {
    /// How it is declared.
    pub declaration: ClockDeclaration,
    /// What is known of it.
    pub estimate: Estimate,
    /// What is wrong with it, in words and numbers, if anything is known to be.
    pub fault: Option<String>,
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
    /// Least time between two settings that change what is run, ns, 0 for none to 1 h.
    pub least_hold_ns: i64,
    /// Fastest change of pitch to bring the phase error back, ppm, 0.1 to 1000.
    pub pitch_limit_ppm: f64,
    /// True for a trial: settings are decided and recorded, but no watcher or follower hears of
    /// them.
    pub silent: bool,
    /// Clock of another source that can carry the same stream.
    pub backup: Option<Id>,
}

impl CrossingDeclaration {
    /// A crossing of two clocks with these bounds and, for the rest, the defaults of the contract:
    /// one sample of headroom, a cadence, no group, 1 s of lead, a review every 24 h, no least hold,
    /// 20 ppm of pitch, not silent, no backup.
    pub fn new(id: Id, source: Id, sink: Id, bounds: Bounds) -> Self {
        Self {
            id,
            display_name: String::new(),
            source,
            sink,
            bounds,
            headroom_samples: 1.0,
            realisation: Realisation::Cadence,
            group: None,
            lead_ns: 1_000_000_000,
            review_horizon_ns: 86_400_000_000_000,
            least_hold_ns: 0,
            pitch_limit_ppm: 20.0,
            silent: false,
            backup: None,
        }
    }
}

/// What a resampler can do to reach a ratio that its bank does not hold.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Realisation {
    /// One L/M only.
    Single,
    /// Two L/M in turn at block ends.
    Cadence,
    /// One table of as many phases as the largest L, and one of two advances for each output.
    Stepping,
    /// Two L/M, each held until the running error would leave a swing.
    Lazy,
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
    /// A clock of it was never measured: it runs at the nominal ratio.
    Waiting,
    /// The phase error is kept within the headroom, as far as is known; also while a clock is in holdover.
    /// Settings are changed in time, so a forecast slip under the present one alone does not end this.
    Holding,
    /// The phase error cannot be vouched for: it is outside the headroom, or too uncertain, or what is run
    /// errs by more than the headroom leaves.
    Degraded,
    /// No ratio within the bounds can hold it; the nearest is served.
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
    /// Who pinned it, if it is pinned.
    pub pin: Option<Pin>,
    /// Clock of the source in use: the declared one or the backup.
    pub source: Id,
    /// Smallest bounds that would hold it, if it is out of bounds and there are any.
    pub needed: Option<Bounds>,
}

/// A crossing is pinned: what it runs stays.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Pin {
    /// Who pinned it.
    pub by: String,
    /// House time since when, ns.
    pub since_ns: i64,
    /// Why, in the operator's words; may be empty.
    pub note: String,
}
