//! Conversions between what travels and what the rest of the crate works with. Nothing outside
//! this module and the streams that carry them sees a wire type.

mod act;
mod facility;
mod fraction;
mod name;
mod reading;
mod setting;

use std::fmt::Debug;

use thiserror::Error;

pub(crate) use name::{clock_name, crossing_name, crossing_of, setting_name};

/// A message from the daemon that breaks the contract.
#[derive(Clone, Debug, PartialEq, Eq, Error)]
#[error("{field} is {value}; accepted is {accepted}")]
pub struct WireError {
    /// Path of the field at fault.
    pub field: String,
    /// What it held.
    pub value: String,
    /// What the contract says.
    pub accepted: &'static str,
}

impl WireError {
    fn new(field: &str, value: impl Debug, accepted: &'static str) -> Self {
        Self {
            field: field.to_owned(),
            value: format!("{value:?}"),
            accepted,
        }
    }
}

/// The content of a field that must be set.
fn required<T>(field: &str, value: Option<T>) -> Result<T, WireError> {
    value.ok_or_else(|| WireError::new(field, "", "a value: the field must be set"))
}
