//! Stability statistics of a clock, for those that are declared to have them.

use ratewright_timing::State;
use ratewright_timing::stability::{OctaveFigures, Stability};
use serde::{Deserialize, Serialize};

use crate::clocks::Traced;
use crate::engine::Engine;
use crate::link::Lineage;
use crate::{HouseNs, Id};

/// Spacing of the phases that statistics are made of, ns (10 s).
const SPACING_NS: i64 = 10_000_000_000;

/// Statistics of the phase of a clock's estimate against house time, in steps of 10 s: what the
/// clock does, less what the estimator could tell to be noise of the readings.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) struct Statistics {
    stability: Stability,
    lineage: Lineage,
    next_ns: HouseNs,
}

impl Statistics {
    fn begin(lineage: Lineage, now: HouseNs) -> Self {
        Statistics {
            stability: Stability::new(SPACING_NS as f64 * 1e-9),
            lineage,
            next_ns: now,
        }
    }

    /// Takes the phases that are due by `now`. `None` if there is nothing to go on with: the clock
    /// is not read now, or its phase began anew, or a phase was missed.
    fn go_on(mut self, now: HouseNs, clock: &Traced) -> Option<Self> {
        let is_missed = now.saturating_sub(self.next_ns) >= SPACING_NS;
        if self.lineage != clock.lineage || is_missed || !is_read(clock) {
            return None;
        }
        if self.next_ns <= now {
            let estimate = &clock.estimate;
            let ago_ns = (now - self.next_ns) as f64;
            let phase_ns = estimate.phase_ns - estimate.drift * ago_ns;
            self.stability.push(phase_ns * 1e-9);
            self.next_ns = self.next_ns.saturating_add(SPACING_NS);
        }
        Some(self)
    }
}

fn is_read(clock: &Traced) -> bool {
    let state = clock.estimate.state;
    clock.measured && matches!(state, State::Acquiring | State::Locked)
}

/// Goes on with the statistics of a clock that is declared to have them, or begins anew.
pub(crate) fn kept(
    statistics: Option<Box<Statistics>>,
    now: HouseNs,
    clock: &Traced,
) -> Option<Box<Statistics>> {
    let begun = || is_read(clock).then(|| Statistics::begin(clock.lineage, now));
    let before = statistics.and_then(|statistics| statistics.go_on(now, clock));
    before.or_else(begun).map(Box::new)
}

impl Engine {
    /// Stability of a clock against house time at octaves of 10 s: of the phase of its estimate,
    /// since that was last interrupted. Empty unless it was declared that statistics are kept.
    pub fn stability(&self, clock: &Id) -> Vec<OctaveFigures> {
        let record = self.clocks.get(clock);
        let statistics = record.and_then(|record| record.statistics.as_ref());
        statistics.map_or_else(Vec::new, |kept| kept.stability.figures().collect())
    }
}
