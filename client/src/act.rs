//! What operators do to a crossing.

use crate::Id;

/// What an operator did to a crossing.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Act {
    /// The crossing.
    pub crossing: Id,
    /// Who did it.
    pub by: String,
    /// Why, in the operator's words; may be empty.
    pub note: String,
    /// When, house time, ns.
    pub at_ns: i64,
    /// What was done.
    pub what: ActKind,
}

/// Kinds of acts.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum ActKind {
    /// The crossing was pinned: what it ran stayed.
    Pinned,
    /// The crossing was released: it was decided again.
    Released,
    /// The stream came from another source from then on.
    ChangedOver {
        /// Clock of the source before.
        from: Id,
        /// Clock of the source from then on.
        to: Id,
    },
}
