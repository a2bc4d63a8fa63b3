//! Resource names.

use super::WireError;
use crate::{Id, Reference, SettingNumber};

/// `clocks/{id}`.
pub(crate) fn clock_name(id: &Id) -> String {
    format!("clocks/{id}")
}

/// `crossings/{id}`.
pub(crate) fn crossing_name(id: &Id) -> String {
    format!("crossings/{id}")
}

/// The crossing of a name, if it is one.
pub(crate) fn crossing_of(name: &str) -> Option<Id> {
    id_of("crossing", "crossings", name).ok()
}

/// `crossings/{id}/settings/{epoch}-{number}`, or `latest` in place of the number.
pub(crate) fn setting_name(crossing: &Id, number: Option<SettingNumber>) -> String {
    match number {
        Some(number) => format!("crossings/{crossing}/settings/{number}"),
        None => format!("crossings/{crossing}/settings/latest"),
    }
}

/// `house`, or the name of a clock.
pub(super) fn reference_name(reference: &Reference) -> String {
    match reference {
        Reference::House => "house".to_owned(),
        Reference::Clock(id) => clock_name(id),
    }
}

/// The id in `collection/{id}`.
pub(super) fn id_of(field: &str, collection: &str, name: &str) -> Result<Id, WireError> {
    name.strip_prefix(collection)
        .and_then(|rest| rest.strip_prefix('/'))
        .and_then(|id| Id::new(id).ok())
        .ok_or_else(|| WireError::new(field, name, "a resource name such as clocks/{id}"))
}

/// An id that may be empty.
pub(super) fn optional_id(field: &str, text: &str) -> Result<Option<Id>, WireError> {
    if text.is_empty() {
        return Ok(None);
    }
    Id::new(text)
        .map(Some)
        .map_err(|_| WireError::new(field, text, "an id, or nothing"))
}

/// `house`, `clocks/{id}` or empty.
pub(super) fn optional_reference(field: &str, text: &str) -> Result<Option<Reference>, WireError> {
    match text {
        "" => Ok(None),
        "house" => Ok(Some(Reference::House)),
        name => Ok(Some(Reference::Clock(id_of(field, "clocks", name)?))),
    }
}
