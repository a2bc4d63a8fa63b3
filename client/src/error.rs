//! Why a call failed.

use std::fmt;
use std::time::Duration;

use thiserror::Error;

use crate::WireError;

/// Why a call failed.
#[derive(Clone, Debug, PartialEq, Error)]
pub enum CallError {
    /// The daemon could not be reached, or contact was lost before it answered. The call may have
    /// been carried out.
    #[error("no contact with {address}: {reason}")]
    Unreachable {
        /// The address that was tried.
        address: String,
        /// What the transport said.
        reason: String,
    },
    /// The daemon refused the call and changed nothing.
    #[error(transparent)]
    Refused(#[from] Refusal),
    /// The daemon's answer breaks its own contract.
    #[error("the daemon's answer is malformed: {0}")]
    Malformed(#[from] WireError),
}

impl CallError {
    /// True if the daemon refused the call for this kind of reason.
    pub fn is(&self, kind: RefusalKind) -> bool {
        matches!(self, Self::Refused(refusal) if refusal.kind == kind)
    }
}

/// A refused call.
#[derive(Clone, Debug, PartialEq, Error)]
pub struct Refusal {
    /// What kind of refusal.
    pub kind: RefusalKind,
    /// The daemon's words.
    pub message: String,
    /// The fields at fault, if the daemon named any.
    pub violations: Vec<Violation>,
    /// How long the daemon asks to wait before the next try, if it said so.
    pub retry_after: Option<Duration>,
}

impl fmt::Display for Refusal {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(&self.message)?;
        // The daemon's own words name the field as a rule; saying it twice helps nobody.
        for violation in &self.violations {
            if self.kind == RefusalKind::Invalid && !self.message.contains(&violation.field) {
                write!(f, "; {violation}")?;
            }
        }
        Ok(())
    }
}

/// Kinds of refusals, after the canonical codes.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[non_exhaustive]
pub enum RefusalKind {
    /// A field has a value that is not accepted (`INVALID_ARGUMENT`, `OUT_OF_RANGE`).
    Invalid,
    /// No such clock, crossing or setting (`NOT_FOUND`).
    NotFound,
    /// The name is taken (`ALREADY_EXISTS`).
    AlreadyExists,
    /// Something else has to change first (`FAILED_PRECONDITION`).
    Precondition,
    /// It was changed meanwhile by someone else (`ABORTED`).
    Aborted,
    /// The caller may not do this (`PERMISSION_DENIED`, `UNAUTHENTICATED`).
    Denied,
    /// Any other code.
    Other,
}

/// A field at fault.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Violation {
    /// Path of the field, such as `crossing.max_l`.
    pub field: String,
    /// The value that was sent and what would have been accepted, in words.
    pub description: String,
}

impl fmt::Display for Violation {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{}: {}", self.field, self.description)
    }
}
