//! The sample facility: Radio Lanternsea.
//!
//! An invented broadcaster in an invented harbour town: a dance hall with a mixing desk, an archive of
//! shellac and film in the attic, a machine room in the cellar, pictures from abroad, and an outside
//! broadcast from the night ferry. The ferry passes behind a headland six minutes after the start and
//! stays there for four; the gramophone's converter restarts after fourteen and loses 40 ms.

mod clocks;
mod crossings;

use ratewright_timing::sim::Period;

use crate::plan::Plan;

const S: i64 = 1_000_000_000;

/// Seed of the sample facility's noise.
pub const SEED: u64 = 0x1A47_E245_EA00_0001;

/// When the ferry's link is down, since the origin.
pub const FERRY_OUTAGE: Period = Period {
    from_ns: 360 * S,
    to_ns: 600 * S,
};

/// When the gramophone's clock steps, ns since the origin.
pub const GRAMOPHONE_STEP_AT_NS: i64 = 840 * S;

/// By how much it steps, s.
pub const GRAMOPHONE_STEP_BY_S: f64 = -0.04;

/// The plan of the sample facility.
pub fn plan() -> Plan {
    Plan {
        hosts: clocks::hosts(),
        devices: clocks::devices(),
        exact: clocks::exact(),
        crossings: crossings::crossings(),
        followers: Vec::new(),
    }
}

fn id(text: &str) -> ratewright_control::Id {
    ratewright_control::Id::new(text).expect("the ids of the sample facility are well formed")
}
