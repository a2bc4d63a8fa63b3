//! What is wrong with a file.

use std::fmt;

use thiserror::Error;

/// Every fault of a file; displayed one a line.
#[derive(Clone, Debug, PartialEq, Eq, Error)]
pub struct Faults {
    /// The file.
    pub file: String,
    /// The faults, at least one, in the order of their lines.
    pub faults: Vec<Fault>,
}

/// One fault.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Fault {
    /// Line in the file, from 1; 0 if it has none.
    pub line: usize,
    /// Path of the key, such as `crossing[2].max_l` (counted from 0); empty if it is none of a key.
    pub key: String,
    /// What is wrong, with the value as it was written.
    pub problem: String,
    /// What is accepted.
    pub accepted: String,
}

impl Fault {
    /// The fault of a file that cannot be read at all.
    pub fn unreadable(error: &std::io::Error) -> Self {
        Self {
            line: 0,
            key: String::new(),
            problem: format!("cannot be read ({error})"),
            accepted: "a file in TOML that this process may read".to_owned(),
        }
    }
}

impl fmt::Display for Faults {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        for (i, fault) in self.faults.iter().enumerate() {
            let end = if i == 0 { "" } else { "\n" };
            match fault.line {
                0 => write!(f, "{end}{}: {fault}", self.file)?,
                line => write!(f, "{end}{}:{line}: {fault}", self.file)?,
            }
        }
        Ok(())
    }
}

impl fmt::Display for Fault {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let Self {
            key,
            problem,
            accepted,
            ..
        } = self;
        let gap = if key.is_empty() { "" } else { " " };
        write!(f, "{key}{gap}{problem}; accepted: {accepted}")
    }
}
