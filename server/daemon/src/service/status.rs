//! Refusals as canonical status codes with `google.rpc` details.
//!
//! Every status carries an `ErrorInfo` whose reason programs may rely on. A field at fault is in
//! `BadRequest` (or `PreconditionFailure`), with its value and what is accepted; a resource in
//! `ResourceInfo`.

use std::{collections::HashMap, time::Duration};

use tonic::{Code, Status};
use tonic_types::{ErrorDetails, StatusExt as _};

use crate::refused::{Refused, Violation, Why};

/// Whose reasons those in `ErrorInfo` are.
const DOMAIN: &str = "ratewright.v1";
/// When a call that met a full or a stopping daemon may be tried again.
const RETRY_AFTER: Duration = Duration::from_secs(1);

impl From<Refused> for Status {
    fn from(refused: Refused) -> Self {
        let message = refused.to_string();
        let mut details = ErrorDetails::new();
        details.set_error_info(reason(&refused), DOMAIN, HashMap::new());
        let code = describe(refused, &mut details);
        Status::with_error_details(code, message, details)
    }
}

impl From<Violation> for Status {
    fn from(violation: Violation) -> Self {
        Refused::from(violation).into()
    }
}

fn reason(refused: &Refused) -> &'static str {
    match refused {
        Refused::Invalid(_) => "FIELD_VIOLATION",
        Refused::NotFound { .. } => "NOT_KNOWN",
        Refused::AlreadyExists(_) => "ALREADY_DECLARED",
        Refused::StaleEtag { .. } => "STALE_ETAG",
        Refused::Precondition(_) => "PRECONDITION",
        Refused::TooManyStreams { .. } => "TOO_MANY_STREAMS",
        Refused::GoingAway(_) => "GOING_AWAY",
        Refused::Unavailable(_) => "NOT_SERVING",
        Refused::Store(_) => "STORE_FAILED",
    }
}

fn describe(refused: Refused, details: &mut ErrorDetails) -> Code {
    match refused {
        Refused::Invalid(violations) => {
            for violation in violations {
                let text = told(&violation);
                details.add_bad_request_violation(violation.field, text);
            }
            Code::InvalidArgument
        }
        Refused::NotFound { name, field } => {
            if let Some(field) = field {
                details.add_bad_request_violation(field, format!("is {name}, which is not known"));
            }
            details.set_resource_info(kind_of(&name), name, "", "is not known");
            Code::NotFound
        }
        Refused::AlreadyExists(name) => {
            details.set_resource_info(kind_of(&name), name, "", "is declared already");
            Code::AlreadyExists
        }
        Refused::StaleEtag {
            name,
            sent,
            current,
        } => {
            details.add_bad_request_violation("etag", format!("is {sent}: accepted is {current}"));
            details.set_resource_info(kind_of(&name), name, "", "has changed since it was read");
            Code::Aborted
        }
        Refused::Precondition(violation) => {
            let text = told(&violation);
            details.add_precondition_failure_violation("STATE", violation.field, text);
            Code::FailedPrecondition
        }
        Refused::TooManyStreams { limit } => {
            details.add_quota_failure_violation("streams", format!("{limit} streams are open"));
            details.set_retry_info(Some(RETRY_AFTER));
            Code::ResourceExhausted
        }
        Refused::GoingAway(why) => {
            details.set_retry_info(Some(match why {
                Why::Stopping => RETRY_AFTER,
                // A new connection is welcome at once.
                Why::OldConnection => Duration::ZERO,
            }));
            Code::Unavailable
        }
        Refused::Unavailable(_) => {
            details.set_retry_info(Some(RETRY_AFTER));
            Code::Unavailable
        }
        Refused::Store(_) => Code::Internal,
    }
}

fn told(violation: &Violation) -> String {
    format!("is {}: accepted is {}", violation.value, violation.accepted)
}

/// The type of a resource by its name.
fn kind_of(name: &str) -> &'static str {
    if name.contains("/settings/") {
        "ratewright.v1.Setting"
    } else if name.starts_with("crossings/") {
        "ratewright.v1.Crossing"
    } else {
        "ratewright.v1.Clock"
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_violation_tells_field_value_and_what_is_accepted() {
        let status = Status::from(Violation::new(
            "clock.tolerance_ppm",
            f64::NAN,
            "0 to 10000",
        ));
        assert_eq!(status.code(), Code::InvalidArgument);
        let details = status.get_error_details();
        assert_eq!(details.error_info().unwrap().reason, "FIELD_VIOLATION");
        let violation = &details.bad_request().unwrap().field_violations[0];
        assert_eq!(violation.field, "clock.tolerance_ppm");
        assert_eq!(violation.description, "is NaN: accepted is 0 to 10000");
    }

    #[test]
    fn codes_are_the_canonical_ones() {
        let cases = [
            (Refused::not_found("clocks/a"), Code::NotFound),
            (
                Refused::AlreadyExists("clocks/a".into()),
                Code::AlreadyExists,
            ),
            (
                Refused::Precondition(Violation::new("a", 1, "2")),
                Code::FailedPrecondition,
            ),
            (
                Refused::TooManyStreams { limit: 3 },
                Code::ResourceExhausted,
            ),
            (Refused::Unavailable("stopping"), Code::Unavailable),
            (Refused::GoingAway(Why::Stopping), Code::Unavailable),
            (Refused::Store("disk".into()), Code::Internal),
        ];
        for (refused, code) in cases {
            assert_eq!(Status::from(refused).code(), code);
        }
    }

    #[test]
    fn whoever_goes_away_says_how_long_to_wait() {
        let wait = |why| {
            let status = Status::from(Refused::GoingAway(why));
            let details = status.get_error_details();
            assert_eq!(details.error_info().unwrap().reason, "GOING_AWAY");
            details.retry_info().unwrap().retry_delay
        };
        assert_eq!(wait(Why::Stopping), Some(Duration::from_secs(1)));
        assert_eq!(wait(Why::OldConnection), Some(Duration::ZERO));
    }
}
