//! What is due when.

use std::collections::{BTreeMap, BTreeSet};

use serde::{Deserialize, Serialize};

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

/// At most one due time for each subject.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(crate) struct Schedule {
    order: BTreeSet<(HouseNs, Subject)>,
    due: BTreeMap<Subject, HouseNs>,
}

impl Schedule {
    /// Sets a subject's due time, earlier or later than it was.
    pub(crate) fn set(&mut self, subject: Subject, due_ns: HouseNs) {
        if let Some(old_ns) = self.due.insert(subject.clone(), due_ns) {
            self.order.remove(&(old_ns, subject.clone()));
        }
        self.order.insert((due_ns, subject));
    }

    /// The subject is not due any more.
    pub(crate) fn remove(&mut self, subject: &Subject) {
        if let Some(old_ns) = self.due.remove(subject) {
            self.order.remove(&(old_ns, subject.clone()));
        }
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
        let (_, subject) = self.order.pop_first()?;
        self.due.remove(&subject);
        Some(subject)
    }
}
