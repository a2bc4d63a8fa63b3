//! The estimator of one link.

use serde::{Deserialize, Serialize};

use crate::config::{ConfigError, LinkConfig};
use crate::estimate::Estimate;
use crate::measurement::Measurement;
use crate::outcome::{Outcome, Refusal};

/// The estimator of one link: one clock, read against one reference by one probe.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Link {
    config: LinkConfig,
}

impl Link {
    /// A link that has measured nothing yet.
    ///
    /// # Errors
    /// When a field of the declaration is out of its range.
    pub fn new(config: LinkConfig) -> Result<Link, ConfigError> {
        config.check()?;
        Ok(Link { config })
    }

    /// Takes one measurement.
    ///
    /// `sequence` is the reporter's own numbering; numbers not above the last one are dropped
    /// as stale, and a fall of 100,000 or more counts as a restart of the numbering.
    ///
    /// # Errors
    /// When the measurement is impossible; the link is then as it was.
    pub fn observe(&mut self, sequence: u64, m: &Measurement) -> Result<Outcome, Refusal> {
        let _ = (sequence, m);
        Ok(Outcome::Buffered)
    }

    /// What is known at a reference time; earlier times than the last reading count as that.
    pub fn estimate(&self, at_reference_ns: i64) -> Estimate {
        crate::estimate::exact(at_reference_ns)
    }
}
