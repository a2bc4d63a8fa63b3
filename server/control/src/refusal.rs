//! Why an event was refused.

use std::fmt::Display;

use thiserror::Error;

/// What is wrong with a refused event, in the sense of the canonical status codes.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum RefusalKind {
    /// The value can never be accepted.
    Invalid,
    /// It names something that does not exist.
    NotFound,
    /// The value would do, but not in the present state.
    Precondition,
}

/// A refused event. The engine is exactly as it was before.
#[derive(Clone, Debug, PartialEq, Eq, Error)]
#[error("{field} is {value}: accepted is {accepted}")]
pub struct Refusal {
    /// Kind of fault.
    pub kind: RefusalKind,
    /// Path of the field inside the event, such as `measurement.reference_ns`.
    pub field: String,
    /// Its value.
    pub value: String,
    /// What would be accepted.
    pub accepted: String,
}

impl Refusal {
    pub(crate) fn invalid(field: &str, value: impl Display, accepted: impl Display) -> Self {
        Self::new(RefusalKind::Invalid, field, value, accepted)
    }

    pub(crate) fn not_found(field: &str, value: impl Display, accepted: impl Display) -> Self {
        Self::new(RefusalKind::NotFound, field, value, accepted)
    }

    pub(crate) fn precondition(field: &str, value: impl Display, accepted: impl Display) -> Self {
        Self::new(RefusalKind::Precondition, field, value, accepted)
    }

    fn new(kind: RefusalKind, field: &str, value: impl Display, accepted: impl Display) -> Self {
        Refusal {
            kind,
            field: field.to_owned(),
            value: value.to_string(),
            accepted: accepted.to_string(),
        }
    }
}
