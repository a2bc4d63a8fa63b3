//! Why a call is refused, in the daemon's own terms. How that looks on the wire is said once, in
//! `service::status`.

use crate::store::StoreError;

/// A field that was not as accepted.
#[derive(Clone, Debug, PartialEq, Eq)]
pub(crate) struct Violation {
    /// Path of the field as the caller sent it, such as `clock.nominal_rate.denominator`.
    pub(crate) field: String,
    /// The value that was sent.
    pub(crate) value: String,
    /// What would have been accepted.
    pub(crate) accepted: String,
}

impl Violation {
    /// A violation; a long value is cut, so that an answer stays small.
    pub(crate) fn new(
        field: impl Into<String>,
        value: impl ToString,
        accepted: impl Into<String>,
    ) -> Self {
        Self {
            field: field.into(),
            value: shortened(value.to_string()),
            accepted: accepted.into(),
        }
    }

    /// The same below `parent`: `bits` in `counter` becomes `counter.bits`.
    pub(crate) fn below(mut self, parent: &str) -> Self {
        self.field = format!("{parent}.{}", self.field);
        self
    }
}

impl std::fmt::Display for Violation {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        write!(
            f,
            "{} is {}: accepted is {}",
            self.field, self.value, self.accepted
        )
    }
}

/// Why a call is refused. A refused call has changed nothing.
#[derive(Clone, Debug, PartialEq, Eq, thiserror::Error)]
pub(crate) enum Refused {
    /// Fields are not as accepted; every one found is listed.
    #[error("{}", listed(.0))]
    Invalid(Vec<Violation>),
    /// Nothing has that name.
    #[error("{name} is not known")]
    NotFound {
        /// The name.
        name: String,
        /// The field that holds it, if it is not the name of the call's own resource.
        field: Option<String>,
    },
    /// Something has that name already.
    #[error("{0} is declared already")]
    AlreadyExists(String),
    /// The caller's etag is not current.
    #[error("{name} has changed since it was read: its etag is {current}, not {sent}")]
    StaleEtag {
        /// What has changed.
        name: String,
        /// The etag that was sent.
        sent: String,
        /// The etag it has now.
        current: String,
    },
    /// The state of something else forbids it.
    #[error("{0}")]
    Precondition(Violation),
    /// As many streams are open as the daemon serves.
    #[error("{limit} streams are open, and no more are served: try again later")]
    TooManyStreams {
        /// The limit.
        limit: usize,
    },
    /// The daemon or the connection goes away; another one will serve.
    #[error("going away: {}; connect anew, to another daemon if there is one", .0.text())]
    GoingAway(Why),
    /// The daemon does not serve yet, or can no more.
    #[error("the daemon is {0}")]
    Unavailable(&'static str),
    /// The store failed; the daemon is about to stop.
    #[error("the store could not be read: {0}")]
    Store(String),
}

/// Why a stream has to end that nothing is wrong with.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) enum Why {
    /// The daemon stops.
    Stopping,
    /// The connection is as old as it may get.
    OldConnection,
}

impl Why {
    fn text(self) -> &'static str {
        match self {
            Self::Stopping => "the daemon is stopping",
            Self::OldConnection => "the connection is old",
        }
    }
}

impl Refused {
    /// Nothing has the name that the call is about.
    pub(crate) fn not_found(name: impl Into<String>) -> Self {
        Self::NotFound {
            name: name.into(),
            field: None,
        }
    }

    /// The store could not be read.
    pub(crate) fn unreadable(fault: StoreError) -> Self {
        tracing::error!(%fault, "the history could not be read");
        Self::Store(fault.to_string())
    }
}

impl From<Violation> for Refused {
    fn from(violation: Violation) -> Self {
        Self::Invalid(vec![violation])
    }
}

/// Collects the violations of a message, so that all are told at once.
#[derive(Debug, Default)]
pub(crate) struct Violations(Vec<Violation>);

impl Violations {
    /// The value, or a violation kept for later.
    pub(crate) fn note<T>(&mut self, checked: Result<T, Violation>) -> Option<T> {
        checked.map_err(|violation| self.0.push(violation)).ok()
    }

    /// Refuses if anything was noted.
    ///
    /// # Errors
    /// All the violations noted, in order.
    pub(crate) fn into_result(self) -> Result<(), Refused> {
        if self.0.is_empty() {
            Ok(())
        } else {
            Err(Refused::Invalid(self.0))
        }
    }
}

fn listed(violations: &[Violation]) -> String {
    let lines: Vec<String> = violations.iter().map(Violation::to_string).collect();
    lines.join("; ")
}

fn shortened(mut value: String) -> String {
    const LONGEST: usize = 200;
    if value.len() > LONGEST {
        let end = value.floor_char_boundary(LONGEST);
        value.truncate(end);
        value.push('…');
    }
    value
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_long_value_is_cut_at_a_character() {
        let violation = Violation::new("name", "ü".repeat(300), "at most 63 bytes");
        assert_eq!(violation.value.chars().count(), 101);
        assert!(violation.value.ends_with('…'));
    }

    #[test]
    fn all_violations_are_told_at_once() {
        let mut violations = Violations::default();
        assert_eq!(violations.note(Ok::<_, Violation>(7)), Some(7));
        violations.note::<u8>(Err(Violation::new("a", 0, "1 to 9")));
        violations.note::<u8>(Err(Violation::new("b", -1, "0 or more")));
        let refused = violations.into_result().unwrap_err();
        assert_eq!(
            refused.to_string(),
            "a is 0: accepted is 1 to 9; b is -1: accepted is 0 or more"
        );
    }
}
