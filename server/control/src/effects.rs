//! What an event brings about: the only way out.

use ratewright_timing::{Outcome, State};
use serde::{Deserialize, Serialize};

use crate::{CrossingState, Id, Setting};

/// What the caller has to do after an event, in this order.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct Effects {
    /// New settings: to be made durable, then published.
    pub settings: Vec<Setting>,
    /// Changes of state, for log and metrics.
    pub transitions: Vec<Transition>,
    /// How a reading went; absent for other events.
    pub outcome: Option<Outcome>,
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
