//! What the daemon remembers for people, in bounded memory and since its start: how drifts and
//! phase errors went, and what changed.
//!
//! Nothing is decided by it, and nothing of it survives a restart: the journal and the history of
//! settings are the record.

mod trace;

use std::collections::{BTreeMap, VecDeque};

use ratewright_control::{Act, HouseNs, Id, Reason, Setting, Transition};

pub use trace::{Point, Span, Trace};

use crate::board::{ClockView, CrossingView};

/// Changes remembered: an outage of a large facility is two for every clock and crossing of it.
const REMEMBERED: usize = 16_384;

/// Half-width of a 95 % interval of a normal variable, in standard deviations.
const Z95: f64 = 1.959_963_984_540_054;

/// A change, and when it was.
#[derive(Clone, Debug, PartialEq)]
pub struct Happening {
    /// House time.
    pub at_ns: HouseNs,
    /// What changed.
    pub what: What,
}

/// What changed.
#[derive(Clone, Debug, PartialEq)]
pub enum What {
    /// A state, or an account of phase error that began anew.
    Transition(Transition),
    /// What an operator did.
    Act(Act),
    /// A setting that is not a mere renewal.
    Setting {
        /// The crossing it is for.
        crossing: Id,
        /// Its epoch and number.
        numbered: (u64, u64),
        /// Why it was made.
        reason: Reason,
    },
}

impl Happening {
    /// The clock it is about.
    pub fn clock(&self) -> Option<&Id> {
        match &self.what {
            What::Transition(
                Transition::Clock { clock, .. } | Transition::ClockFault { clock, .. },
            ) => Some(clock),
            _ => None,
        }
    }

    /// The crossing it is about.
    pub fn crossing(&self) -> Option<&Id> {
        match &self.what {
            What::Transition(
                Transition::Crossing { crossing, .. } | Transition::Centred { crossing, .. },
            )
            | What::Act(Act { crossing, .. })
            | What::Setting { crossing, .. } => Some(crossing),
            What::Transition(Transition::Clock { .. } | Transition::ClockFault { .. }) => None,
        }
    }
}

/// The memory. The board keeps it behind its own lock.
#[derive(Debug, Default)]
pub(crate) struct Chronicle {
    drifts: BTreeMap<Id, Trace>,
    phases: BTreeMap<Id, Trace>,
    /// Oldest first.
    happenings: VecDeque<Happening>,
}

impl Chronicle {
    /// Notes the drift of a clock that is measured.
    pub(crate) fn note_clock(&mut self, view: &ClockView) {
        if view.declaration.exact || !view.estimate.measured {
            return;
        }
        let estimate = &view.estimate.estimate;
        let trace = entry(&mut self.drifts, &view.declaration.id);
        trace.push(view.as_of_ns, estimate.drift, estimate.low, estimate.high);
    }

    /// Notes the phase error of a crossing.
    pub(crate) fn note_crossing(&mut self, view: &CrossingView) {
        let phase = view.status.phase_error_samples;
        let spread = Z95 * view.status.phase_deviation_samples;
        let trace = entry(&mut self.phases, &view.declaration.id);
        trace.push(view.as_of_ns, phase, phase - spread, phase + spread);
    }

    pub(crate) fn note_setting(&mut self, setting: &Setting) {
        if setting.reason != Reason::Renewal {
            self.note(Happening {
                at_ns: setting.decided_ns,
                what: What::Setting {
                    crossing: setting.crossing.clone(),
                    numbered: (setting.epoch, setting.number),
                    reason: setting.reason,
                },
            });
        }
    }

    pub(crate) fn note(&mut self, happening: Happening) {
        if self.happenings.len() == REMEMBERED {
            self.happenings.pop_front();
        }
        self.happenings.push_back(happening);
    }

    pub(crate) fn forget_clock(&mut self, id: &Id) {
        self.drifts.remove(id);
    }

    pub(crate) fn forget_crossing(&mut self, id: &Id) {
        self.phases.remove(id);
    }

    pub(crate) fn drift(&self, clock: &Id) -> Option<&Trace> {
        self.drifts.get(clock)
    }

    pub(crate) fn phase(&self, crossing: &Id) -> Option<&Trace> {
        self.phases.get(crossing)
    }

    /// What changed from `since_ns` on, newest first.
    pub(crate) fn since(&self, since_ns: HouseNs) -> impl Iterator<Item = &Happening> {
        // Nearly in order: a setting bears the time of its decision, a state that of its change.
        self.happenings
            .iter()
            .rev()
            .filter(move |happening| happening.at_ns >= since_ns)
    }
}

fn entry<'a>(traces: &'a mut BTreeMap<Id, Trace>, id: &Id) -> &'a mut Trace {
    if !traces.contains_key(id) {
        traces.insert(id.clone(), Trace::default());
    }
    traces.get_mut(id).expect("it was put there above")
}
