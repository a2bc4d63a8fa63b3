//! What became of a measurement: an outcome, or a refusal that changed nothing.

use serde::{Deserialize, Serialize};
use thiserror::Error;

/// What an accepted measurement did.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub enum Outcome {
    /// Kept for the start fit; the filter has not begun yet.
    Buffered,
    /// Weighed into the estimate.
    Used,
    /// Far off what the noise allows: it moved nothing, but may become evidence of a step.
    Outlier,
    /// Its sequence number was seen already, or a later one was: dropped.
    Stale,
    /// It was the last piece of evidence for an event, which the link has now followed.
    Event(Event),
}

/// Something that happened to the clock or to the path, found from the measurements.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub enum Event {
    /// The phase jumped (or the counter was reset); the drift goes on.
    PhaseStep,
    /// The least latency of one direction changed; the clock did not.
    RouteChange,
    /// The drift jumped.
    FrequencyJump,
    /// Nothing fitted any more: the link began anew.
    Restart,
}

/// Why a measurement was refused. The link is as it was before.
#[derive(Clone, Debug, PartialEq, Error)]
#[non_exhaustive]
pub enum Refusal {
    /// A field outside its range.
    #[error("{field} is {value}: accepted is {accepted}")]
    OutOfRange {
        /// Name of the field.
        field: &'static str,
        /// Its value.
        value: String,
        /// What would be accepted.
        accepted: &'static str,
    },
    /// Reference time not after the measurement before it.
    #[error("{field} is {value}: accepted is a time after {last}, the last one taken")]
    TimeWentBack {
        /// Name of the field.
        field: &'static str,
        /// Its value, ns.
        value: i64,
        /// Reference time of the last measurement taken, ns.
        last: i64,
    },
    /// Another kind of measurement than the link has taken so far.
    #[error("kind is {value}: accepted is {accepted}, which this link began with")]
    KindChanged {
        /// Kind of the refused measurement.
        value: &'static str,
        /// Kind the link takes.
        accepted: &'static str,
    },
    /// Another counter width than the link has taken so far.
    #[error("bits is {value}: accepted is {accepted}, which this link began with")]
    WidthChanged {
        /// Width of the refused measurement.
        value: u32,
        /// Width the link takes.
        accepted: u32,
    },
}
