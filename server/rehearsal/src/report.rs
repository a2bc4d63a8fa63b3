//! How a rehearsal went.

use ratewright_control::{CrossingState, Id};
use ratewright_timing::State;

use crate::tally::Tenure;

/// What came of a rehearsal. Times are seconds since its beginning.
#[derive(Clone, Debug, PartialEq)]
pub struct Report {
    /// Seed of its noise.
    pub seed: u64,
    /// How long it lasted, s.
    pub length_s: f64,
    /// Readings that reached the house.
    pub readings: u64,
    /// Events that the engine refused, and why it refused the first of them.
    pub refused: u64,
    /// See `refused`.
    pub first_refusal: Option<String>,
    /// The crossings, in the order of the plan.
    pub crossings: Vec<CrossingReport>,
    /// The clocks that are measured, in the order of the plan.
    pub clocks: Vec<ClockReport>,
}

/// How a crossing fared.
#[derive(Clone, Debug, PartialEq)]
pub struct CrossingReport {
    /// The crossing.
    pub crossing: Id,
    /// Its headroom, sink samples.
    pub headroom_samples: f64,
    /// Settings made.
    pub settings: u64,
    /// Of these, the ones that changed the wanted ratio.
    pub changes: u64,
    /// Largest magnitude of the true phase error, with the realisation's own error, sink samples.
    pub worst_samples: f64,
    /// Largest magnitude of the phase error as the engine had it, sink samples.
    pub worst_believed_samples: f64,
    /// Times that the true phase error left the headroom.
    pub slips: u64,
    /// When it first did.
    pub first_slip_s: Option<f64>,
    /// Time in each state.
    pub states: Tenure<CrossingState>,
    /// Its course, if it was to be kept.
    pub trace: Trace,
}

/// The course of a crossing.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Trace {
    /// Phase errors, every ten seconds and whenever what is run changed.
    pub phase: Vec<TracePoint>,
    /// When what is run changed.
    pub changes_s: Vec<f64>,
}

/// The phase error at a time, sink samples.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct TracePoint {
    /// When, s.
    pub at_s: f64,
    /// The true one, without the realisation's own error.
    pub truth: f64,
    /// As the engine had it.
    pub believed: f64,
}

/// How a clock was measured.
#[derive(Clone, Debug, PartialEq)]
pub struct ClockReport {
    /// The clock.
    pub clock: Id,
    /// How often its true drift was within the 95 % interval, looked at every ten seconds while it was
    /// measured; `None` if it never was.
    pub coverage: Option<f64>,
    /// When it first locked.
    pub locked_after_s: Option<f64>,
    /// Time in each state.
    pub states: Tenure<State>,
}

impl Report {
    /// Slips of all crossings.
    pub fn slips(&self) -> u64 {
        self.crossings.iter().map(|crossing| crossing.slips).sum()
    }
}
