//! A setting: one decision for a crossing.

use ratewright_handle::{Realised, SettingNumber};
use ratewright_ratio::{Bracket, Fraction, Interval, Parents, SteppingPair};

use crate::Id;
use crate::wire::setting_name;

/// One decision for a crossing. Immutable: a change is a new setting with a higher number.
#[derive(Clone, Debug, PartialEq)]
pub struct Setting {
    /// The crossing it is for.
    pub crossing: Id,
    /// Its place among the settings of the crossing.
    pub number: SettingNumber,
    /// The ratio to hold on the long run, exact. A resampler that runs one ratio only may have to
    /// make do with the nearest to it.
    pub wanted: Fraction,
    /// What to run.
    pub realised: Realised,
    /// What is run over the target, minus 1, at the decision; positive fills the sink's buffer.
    pub residual: f64,
    /// What proves the choice.
    pub proof: Proof,
    /// House time of the decision, ns.
    pub decided_ns: i64,
    /// House time of the effect, ns: the first block end at or after it.
    pub effect_ns: i64,
    /// House time by which the daemon looks at it again at the latest, ns.
    pub review_ns: i64,
    /// House time after which a follower that heard nothing reports itself expired, ns. It goes
    /// on holding the long-run average: expiry never stops a stream.
    pub expiry_ns: i64,
    /// Forecast of the decision: seconds from the effect until the 95 % band of the phase error
    /// leaves the headroom, if nothing is set anew; `None` if it does not within a day.
    pub seconds_to_slip: Option<f64>,
    /// Why it was decided.
    pub reason: Reason,
    /// What it rested on.
    pub evidence: Evidence,
}

impl Setting {
    /// The name on the wire: `crossings/{id}/settings/{epoch}-{number}`.
    pub fn name(&self) -> String {
        setting_name(&self.crossing, Some(self.number))
    }
}

/// What proves a setting.
#[derive(Clone, Debug, PartialEq)]
pub enum Proof {
    /// No ratio within the bounds is nearer to the target.
    Nearest(Bracket),
    /// No simpler fraction lies in the interval.
    Simplest {
        /// The interval, closed.
        interval: Interval,
        /// The parents of the fraction.
        parents: Parents,
    },
    /// The two ratios of the cadence are neighbours within the bounds.
    Neighbours(Bracket),
    /// The two advances enclose the wanted ratio.
    Stepping(SteppingPair),
    /// There is no proof, for this reason.
    Uncertified(String),
}

/// Why a setting was decided.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Reason {
    /// The crossing is new.
    First,
    /// The evidence no longer allowed the setting before.
    Evidence,
    /// The phase error has to be brought back.
    Recovery,
    /// The crossing or one of its clocks was declared anew.
    Declaration,
    /// Another crossing of the group changed.
    Group,
    /// Only expiry and review were moved on.
    Renewal,
    /// The stream comes from another source.
    ChangeOver,
}

/// What a decision rested on.
#[derive(Clone, Debug, PartialEq)]
pub struct Evidence {
    /// Target ratio.
    pub target: f64,
    /// Lower end of its 95 % interval.
    pub target_low: f64,
    /// Upper end of its 95 % interval.
    pub target_high: f64,
    /// Drift of the source clock.
    pub source_drift: f64,
    /// Its standard deviation.
    pub source_deviation: f64,
    /// Drift of the sink clock.
    pub sink_drift: f64,
    /// Its standard deviation.
    pub sink_deviation: f64,
    /// Phase error at the decision, sink samples.
    pub phase_error_samples: f64,
    /// Its standard deviation, sink samples.
    pub phase_deviation_samples: f64,
    /// Lowest wanted ratio the policy would have taken, if it had a choice.
    pub allowed_low: Option<Fraction>,
    /// Highest wanted ratio the policy would have taken, if it had a choice.
    pub allowed_high: Option<Fraction>,
    /// Seconds the policy expects to hold the setting.
    pub expected_hold_seconds: f64,
}
