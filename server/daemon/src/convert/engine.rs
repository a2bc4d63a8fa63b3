//! The engine's refusals in the caller's words: paths as in the contract, and resource names.

use ratewright_control::{Refusal, RefusalKind};

use crate::refused::{Refused, Violation};

/// A refusal as a violation; `path_of` tells the contract's path of an engine's field.
pub(crate) fn violation(refusal: Refusal, path_of: impl Fn(&str) -> String) -> Violation {
    let value = sent_value(&refusal.field, refusal.value);
    Violation::new(path_of(&refusal.field), value, refusal.accepted)
}

/// A refusal of a call.
pub(crate) fn refused(refusal: Refusal, path_of: impl Fn(&str) -> String) -> Refused {
    let kind = refusal.kind;
    let violation = violation(refusal, path_of);
    match kind {
        RefusalKind::Invalid => Refused::Invalid(vec![violation]),
        RefusalKind::Precondition => Refused::Precondition(violation),
        RefusalKind::NotFound => Refused::NotFound {
            name: violation.value,
            field: Some(violation.field),
        },
    }
}

/// The engine knows ids where callers send names.
fn sent_value(field: &str, value: String) -> String {
    match field {
        "clock" | "reference" | "source" | "sink" | "backup" if value != "house" => {
            format!("clocks/{value}")
        }
        "crossing" => format!("crossings/{value}"),
        _ => value,
    }
}
