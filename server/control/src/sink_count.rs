//! The sink's own count of samples, as its follower says it with each setting that it applied: a
//! second opinion of the sink's clock, and where a restart shows.

use ratewright_timing::Estimate;
use serde::{Deserialize, Serialize};

use crate::engine::Engine;
use crate::{ClockFault, Effects, HouseNs, Id, Transition};

/// Deviation of the instant at which a follower counts, s (own choice: what a follower makes of
/// house time, and a block of its buffer).
const COUNTED_WITHIN_S: f64 = 2e-3;
/// A count further off than so many deviations is at odds with the readings.
const AT_ODDS: f64 = 5.0;

/// A count at a house time.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) struct SinkCount {
    pub(crate) sample: u64,
    pub(crate) house_ns: HouseNs,
}

/// What a later count says.
#[derive(Clone, Copy, Debug, PartialEq)]
enum Said {
    /// The count fell: the sink began anew.
    BeganAnew,
    /// It goes with the estimate of the sink's clock, to within so many deviations of this.
    AsEstimated { deviation: f64 },
    /// It does not: the drift by the count, and the deviation of the two from each other.
    AtOdds { drift: f64, deviation: f64 },
}

impl SinkCount {
    /// Compares a later count with what the estimate of the sink's clock expects.
    fn then(&self, later: SinkCount, nominal_hz: f64, estimate: &Estimate) -> Said {
        let Some(samples) = later.sample.checked_sub(self.sample) else {
            return Said::BeganAnew;
        };
        let span_s = later.house_ns.saturating_sub(self.house_ns) as f64 * 1e-9;
        let drift = samples as f64 / (nominal_hz * span_s) - 1.0;
        let counted = 2.0 * COUNTED_WITHIN_S * COUNTED_WITHIN_S;
        let deviation = (estimate.predict_variance(span_s) + counted).sqrt() / span_s;
        if (drift - estimate.drift).abs() <= AT_ODDS * deviation {
            return Said::AsEstimated { deviation };
        }
        Said::AtOdds { drift, deviation }
    }
}

impl ClockFault {
    /// True if a count with this deviation would show the fault if it were still there: two that
    /// follow each other closely tell nothing.
    fn would_show(&self, deviation: f64) -> bool {
        match self {
            ClockFault::CountedOtherwise {
                counted, estimated, ..
            } => (counted - estimated).abs() > AT_ODDS * deviation,
            _ => false,
        }
    }
}

impl Engine {
    /// Takes the sink's count of a crossing, which the caller has found; 0 says nothing. A count
    /// that fell means that the sink began anew, with its buffer in the centre.
    pub(crate) fn counted(
        &mut self,
        crossing: &Id,
        count: SinkCount,
        now: HouseNs,
        effects: &mut Effects,
    ) {
        let Some(record) = self.crossings.get_mut(crossing) else {
            return;
        };
        let before = record.sink_count;
        if count.sample == 0 || before.is_some_and(|before| before.house_ns >= count.house_ns) {
            return;
        }
        record.sink_count = Some(count);
        let sink = record.declaration.sink.clone();
        let (Some(before), Some(clock)) = (before, self.clocks.get(&sink)) else {
            return;
        };
        let (hz, fault) = (clock.declaration.hz(), clock.fault.as_deref().copied());
        let Some(traced) = self.clocks.estimate(&sink, now) else {
            return;
        };
        let estimate = traced.estimate;
        match before.then(count, hz, &estimate) {
            Said::BeganAnew => {
                let reason = format!(
                    "the count of the sink {sink} fell from {} to {}: it began anew, with its buffer in the \
                     centre",
                    before.sample, count.sample
                );
                effects
                    .transitions
                    .extend(self.begins_anew(crossing, now, reason));
            }
            Said::AtOdds { drift, deviation } if fault.is_none() => {
                let fault = ClockFault::CountedOtherwise {
                    counted: drift,
                    estimated: estimate.drift,
                    deviation,
                };
                effects
                    .transitions
                    .extend(self.clocks.set_fault(&sink, Some(fault)));
            }
            Said::AsEstimated { deviation } if fault.is_some_and(|f| f.would_show(deviation)) => {
                effects
                    .transitions
                    .extend(self.clocks.set_fault(&sink, None));
            }
            Said::AtOdds { .. } | Said::AsEstimated { .. } => {}
        }
    }

    fn begins_anew(&mut self, id: &Id, now: HouseNs, reason: String) -> Option<Transition> {
        let count = self.crossings.get(id)?.sink_count;
        let transition = self.centre_anew(id, now, reason);
        let record = self.crossings.get_mut(id)?;
        record.sink_count = count;
        self.due_crossing(id, now);
        transition
    }
}
