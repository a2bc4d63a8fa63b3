//! Names of clocks, crossings and groups.

use std::fmt;
use std::sync::Arc;

use serde::{Deserialize, Serialize, Serializer};
use thiserror::Error;

/// Name of a clock, a crossing or a group: 1 to 63 of `a`–`z`, `0`–`9` and `-`, the first a letter.
/// Clones share the text.
///
/// ```
/// use ratewright_control::Id;
/// assert_eq!(Id::new("studio-2")?.to_string(), "studio-2");
/// assert!(Id::new("2-studio").is_err());
/// # Ok::<(), ratewright_control::IdError>(())
/// ```
#[derive(Clone, Debug, PartialEq, Eq, PartialOrd, Ord, Hash, Deserialize)]
#[serde(try_from = "String")]
pub struct Id(Arc<str>);

/// A name that is none.
#[derive(Clone, Debug, PartialEq, Eq, Error)]
#[error("name is {value:?}: accepted are {accepted}", accepted = Id::ACCEPTED)]
pub struct IdError {
    /// The refused name.
    pub value: String,
}

impl Id {
    /// What is accepted as a name, in words.
    pub const ACCEPTED: &'static str = "1 to 63 of a-z, 0-9 and -, beginning with a letter";

    /// Checks and takes a name.
    ///
    /// # Errors
    /// [`IdError`] if it is not as [`Id::ACCEPTED`] says.
    pub fn new(name: &str) -> Result<Id, IdError> {
        let known = |c: u8| c.is_ascii_lowercase() || c.is_ascii_digit() || c == b'-';
        let first_is_letter = name.bytes().next().is_some_and(|c| c.is_ascii_lowercase());
        if first_is_letter && name.len() <= 63 && name.bytes().all(known) {
            Ok(Id(name.into()))
        } else {
            let value = name.chars().take(80).collect();
            Err(IdError { value })
        }
    }

    /// The name as text.
    pub fn as_str(&self) -> &str {
        &self.0
    }
}

impl fmt::Display for Id {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(&self.0)
    }
}

/// Without a copy: every reading of a journal has a name or two.
impl Serialize for Id {
    fn serialize<S: Serializer>(&self, to: S) -> Result<S::Ok, S::Error> {
        to.serialize_str(&self.0)
    }
}

impl TryFrom<String> for Id {
    type Error = IdError;

    fn try_from(name: String) -> Result<Self, IdError> {
        Id::new(&name)
    }
}
