//! Ids of clocks, crossings, groups and probes.

use std::fmt;
use std::str::FromStr;

use thiserror::Error;

/// Longest id, in bytes.
const LONGEST: usize = 63;

/// An id: 1 to 63 of a–z, 0–9 and `-`, starting with a letter.
///
/// # Examples
/// ```
/// use ratewright_client::Id;
/// assert_eq!(Id::new("stage-box-1")?.to_string(), "stage-box-1");
/// assert!(Id::new("Stage box").unwrap_err().to_string().contains("a-z"));
/// # Ok::<(), ratewright_client::IdError>(())
/// ```
#[derive(Clone, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub struct Id(String);

/// A text that is not an id.
#[derive(Clone, Debug, PartialEq, Eq, Error)]
#[error("id {value:?}: accepted are 1 to 63 of a-z, 0-9 and '-', starting with a letter")]
pub struct IdError {
    /// The refused text.
    pub value: String,
}

impl Id {
    /// The id of this text.
    ///
    /// # Errors
    /// [`IdError`] if it has other characters or is too long.
    pub fn new(text: &str) -> Result<Self, IdError> {
        let starts = text
            .bytes()
            .next()
            .is_some_and(|byte| byte.is_ascii_lowercase());
        let only = text
            .bytes()
            .all(|b| b.is_ascii_lowercase() || b.is_ascii_digit() || b == b'-');
        if starts && only && text.len() <= LONGEST {
            Ok(Self(text.to_owned()))
        } else {
            Err(IdError {
                value: text.to_owned(),
            })
        }
    }

    /// The text.
    pub fn as_str(&self) -> &str {
        &self.0
    }
}

impl fmt::Display for Id {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.pad(&self.0)
    }
}

impl FromStr for Id {
    type Err = IdError;

    fn from_str(text: &str) -> Result<Self, IdError> {
        Self::new(text)
    }
}
