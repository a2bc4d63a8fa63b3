//! Who runs the settings of a crossing.

use ratewright_control::Id;
use ratewright_timing::sim::Period;
use serde::{Deserialize, Serialize};

/// The follower of a crossing: takes each setting at its sink's first block end at or after the effect.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Follower {
    /// The crossing.
    pub crossing: Id,
    /// Sink samples in a block, at least 1.
    pub block_samples: u32,
    /// From a decision until it is heard, ns.
    pub delivery_ns: i64,
    /// When it applies nothing, since the facility's origin; what was due takes effect afterwards.
    pub stuck: Vec<Period>,
    /// True if it says when a setting took effect.
    pub says_applied: bool,
    /// How it reports its buffer's level; `None` if it does not.
    pub levels: Option<Levels>,
}

/// Reports of a buffer's level.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Levels {
    /// Time between reports, ns.
    pub every_ns: i64,
    /// Standard deviation of the error, sink samples.
    pub deviation_samples: f64,
}

impl Follower {
    /// A follower with blocks of one sample that says nothing.
    pub fn silent(crossing: Id) -> Self {
        Self {
            crossing,
            block_samples: 1,
            delivery_ns: 0,
            stuck: Vec::new(),
            says_applied: false,
            levels: None,
        }
    }

    /// The first instant at or after `at_ns` since the origin at which it applies what is due.
    pub(crate) fn free_from(&self, at_ns: i64) -> i64 {
        let mut free_ns = at_ns;
        // A stretch may end within another one.
        while let Some(stuck) = self.stuck.iter().find(|stuck| stuck.holds(free_ns)) {
            free_ns = stuck.to_ns;
        }
        free_ns
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn what_is_due_while_it_is_stuck_waits_for_the_end() {
        let period = |from_ns, to_ns| Period { from_ns, to_ns };
        let follower = Follower {
            stuck: vec![period(30, 50), period(10, 35)],
            ..Follower::silent(Id::new("line").unwrap())
        };
        for (due, free) in [(9, 9), (10, 50), (34, 50), (49, 50), (50, 50)] {
            assert_eq!(follower.free_from(due), free, "{due}");
        }
    }
}
