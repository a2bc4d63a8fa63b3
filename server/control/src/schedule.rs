//! What is due when.

use std::collections::BTreeSet;

use serde::{Deserialize, Serialize};

use crate::engine::Engine;
use crate::{HouseNs, Id};

/// Whose turn it is.
#[derive(Clone, Debug, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
pub(crate) enum Subject {
    /// A clock's state is looked at.
    Clock(Id),
    /// A crossing without a group is decided.
    Crossing(Id),
    /// The crossings of a group are decided together.
    Group(Id),
}

/// The due time of what is never due.
pub(crate) const NEVER: HouseNs = HouseNs::MAX;

/// At most one due time for each subject, which its record holds as well.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(crate) struct Schedule {
    order: BTreeSet<(HouseNs, Subject)>,
}

impl Schedule {
    /// Sets a subject's due time, earlier or later than it was.
    pub(crate) fn set(&mut self, subject: Subject, held: &mut HouseNs, due_ns: HouseNs) {
        let before = (*held, subject);
        self.order.remove(&before);
        *held = due_ns;
        self.order.insert((due_ns, before.1));
    }

    /// The subject is not due any more.
    pub(crate) fn remove(&mut self, subject: Subject, held: HouseNs) {
        self.order.remove(&(held, subject));
    }

    /// The first due time.
    pub(crate) fn next(&self) -> Option<HouseNs> {
        self.order.first().map(|(due_ns, _)| *due_ns)
    }

    /// Takes the first subject that is due at `now`.
    pub(crate) fn take_due(&mut self, now: HouseNs) -> Option<Subject> {
        if self.next()? > now {
            return None;
        }
        self.order.pop_first().map(|(_, subject)| subject)
    }
}

/// Crossings that change together.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) struct Group {
    pub(crate) members: BTreeSet<Id>,
    pub(crate) due_ns: HouseNs,
}

impl Default for Group {
    fn default() -> Self {
        Group {
            members: BTreeSet::new(),
            due_ns: NEVER,
        }
    }
}

impl Engine {
    /// Has a subject looked at at a time, if there is such a one.
    pub(crate) fn due(&mut self, subject: Subject, due_ns: HouseNs) {
        let held = match &subject {
            Subject::Clock(id) => self.clocks.get_mut(id).map(|clock| &mut clock.due_ns),
            Subject::Crossing(id) => self.crossings.get_mut(id).map(|record| &mut record.due_ns),
            Subject::Group(id) => self.groups.get_mut(id).map(|group| &mut group.due_ns),
        };
        if let Some(held) = held {
            self.schedule.set(subject, held, due_ns);
        }
    }

    /// Has a crossing decided at a time.
    pub(crate) fn due_crossing(&mut self, id: &Id, due_ns: HouseNs) {
        if let Some(subject) = self.crossings.get(id).map(|record| record.subject()) {
            self.due(subject, due_ns);
        }
    }
}
