//! What has happened on a link: changes of state, each with its reason, and events.

use serde::{Deserialize, Serialize};

use crate::estimate::{Reason, State};
use crate::outcome::Event;

/// Changes of state kept.
const KEPT: usize = 8;

/// A change of state, and the evidence it was made on.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Transition {
    /// Reference time of the reading that made it, ns; for holdover, of the last one before.
    pub at_ns: i64,
    /// State before.
    pub from: State,
    /// State after.
    pub to: State,
    /// Why.
    pub reason: Reason,
    /// Half-width of the 95 % interval then, dimensionless.
    pub half_width: f64,
    /// Readings used until then.
    pub rows_used: u64,
}

/// How often each event was found.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Serialize, Deserialize)]
pub struct EventCounts {
    /// Steps of the phase and resets of the counter.
    pub phase_steps: u64,
    /// Changes of a path's least latency.
    pub route_changes: u64,
    /// Jumps of the drift.
    pub frequency_jumps: u64,
    /// Times the link began anew.
    pub restarts: u64,
}

/// The last changes of state, and the events so far.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct History {
    state: State,
    changes: u64,
    last: [Option<Transition>; KEPT],
    /// How often each event was found.
    pub events: EventCounts,
    /// The last event with its reference time, ns.
    pub last_event: Option<(Event, i64)>,
}

impl Default for History {
    fn default() -> Self {
        History {
            state: State::FreeRunning,
            changes: 0,
            last: [None; KEPT],
            events: EventCounts::default(),
            last_event: None,
        }
    }
}

impl History {
    /// The last changes of state, at most eight, oldest first.
    pub fn transitions(&self) -> impl Iterator<Item = &Transition> {
        let oldest = self.changes as usize % KEPT;
        let (new, old) = self.last.split_at(oldest);
        old.iter().chain(new).flatten()
    }

    pub(crate) fn note_state(
        &mut self,
        at_ns: i64,
        to: State,
        reason: Reason,
        half_width: f64,
        rows_used: u64,
    ) {
        if to == self.state {
            return;
        }
        let transition = Transition {
            at_ns,
            from: self.state,
            to,
            reason,
            half_width,
            rows_used,
        };
        self.last[self.changes as usize % KEPT] = Some(transition);
        self.changes += 1;
        self.state = to;
    }

    pub(crate) fn note_event(&mut self, event: Event, at_ns: i64) {
        let count = match event {
            Event::PhaseStep => &mut self.events.phase_steps,
            Event::RouteChange => &mut self.events.route_changes,
            Event::FrequencyJump => &mut self.events.frequency_jumps,
            Event::Restart => &mut self.events.restarts,
        };
        *count += 1;
        self.last_event = Some((event, at_ns));
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_last_eight_changes_are_kept_oldest_first() {
        let mut history = History::default();
        for i in 0..11 {
            let to = if i % 2 == 0 {
                State::Acquiring
            } else {
                State::Locked
            };
            history.note_state(i, to, Reason::Narrowing, 1e-7, 5);
            history.note_state(i, to, Reason::Narrowing, 1e-7, 5);
        }
        let times: Vec<i64> = history.transitions().map(|t| t.at_ns).collect();
        assert_eq!(times, (3..11).collect::<Vec<i64>>());
    }
}
