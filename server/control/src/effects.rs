//! What an event brings about: the only way out.

use ratewright_timing::{Outcome, State};
use serde::{Deserialize, Serialize};

use crate::{ClockFault, CrossingState, HouseNs, Id, Setting};

/// What the caller has to do after an event, in this order.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct Effects {
    /// New settings: to be made durable, then published.
    /// A [`Setting::silent`] one is to be stored, but published to nobody.
    pub settings: Vec<Setting>,
    /// What an operator did, to be kept.
    pub acts: Vec<Act>,
    /// Changes of state, for log and metrics.
    pub transitions: Vec<Transition>,
    /// How a reading went; absent for other events.
    pub outcome: Option<Outcome>,
}

/// What an operator did to a crossing.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Act {
    /// The crossing.
    pub crossing: Id,
    /// Who did it.
    pub by: String,
    /// Why, in the operator's words; may be empty.
    pub note: String,
    /// When.
    pub at_ns: HouseNs,
    /// What was done.
    pub what: ActKind,
}

/// Kinds of acts.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub enum ActKind {
    /// The crossing was pinned.
    Pinned,
    /// The crossing was released.
    Released,
    /// The stream came from another source from then on.
    ChangedOver {
        /// Clock of the source before.
        from: Id,
        /// Clock of the source from then on.
        to: Id,
    },
}

/// A change of state, with its reason.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub enum Transition {
    /// The estimate of a clock.
    Clock {
        /// The clock.
        clock: Id,
        /// State before.
        from: State,
        /// State now.
        to: State,
        /// Why.
        reason: ratewright_timing::Reason,
    },
    /// A fault of a clock was found, or is gone.
    ClockFault {
        /// The clock.
        clock: Id,
        /// The fault; absent if it is gone.
        fault: Option<ClockFault>,
    },
    /// A crossing.
    Crossing {
        /// The crossing.
        crossing: Id,
        /// State before.
        from: CrossingState,
        /// State now.
        to: CrossingState,
        /// Why, in words and numbers.
        reason: String,
    },
    /// The account of a crossing's phase error began anew.
    Centred {
        /// The crossing.
        crossing: Id,
        /// Phase error it begins with, sink samples.
        phase_error_samples: f64,
        /// Why, in words and numbers.
        reason: String,
    },
}
