//! The ladder: the trade-off of error against size.
//!
//! A ratio belongs to the ladder if no ratio with smaller or equal parts is as near to the target.
//!
//! **Theorem.** The ladder is a subset of the path from the root of the Stern–Brocot tree to the target: a
//! ratio off the path has an ancestor on the path between itself and the target, which is nearer and
//! simpler. The path consists of runs of semiconvergents p + j·p', q + j·q', one run a partial quotient;
//! the ladder takes the tail of each run, from where it comes nearer than the convergent before.
//!
//! **Cost.** O(log bound) runs, however long each is; a ladder near 1 may hold thousands of ratios in one.
//!
//! **Corner cases.** Below 1 the first run is 1/1, 1/2, 1/3 …; above 1 it is 1/1, 2/1, 3/1 …. With a bound on
//! prime factors there are no runs; every rung then has one ratio, and only M counts as size.

use serde::{Deserialize, Serialize};

use crate::bracket::{Node, descend};
use crate::nearest::compare_distances;
use crate::region::DownClosed;
use crate::{Bounds, Exact, Fraction, Region, front, residual};

/// A run of ratios, each nearer to the target than all before it: `first + i·step` by components.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Rung {
    /// The first, simplest and farthest ratio of the run.
    pub first: Fraction,
    /// What is added to get from one ratio to the next.
    pub step: Node,
    /// How many ratios the run has, at least 1.
    pub count: u64,
    /// Residual of the first ratio, (L/M)/target − 1.
    pub first_residual: f64,
    /// Residual of the last ratio.
    pub last_residual: f64,
}

impl Rung {
    /// Ratio number `index` of the run, from 0 to `count` − 1.
    pub fn ratio(&self, index: u64) -> Option<Fraction> {
        let (l, m) = (*self.first.numer(), *self.first.denom());
        (index < self.count)
            .then(|| Fraction::new_raw(l + index * self.step.l, m + index * self.step.m))
    }

    /// The last, nearest ratio of the run.
    pub fn last(&self) -> Fraction {
        self.ratio(self.count - 1)
            .expect("a run has at least one ratio")
    }

    /// A run of one ratio.
    pub(crate) fn single(target: &Exact, ratio: Fraction) -> Self {
        Self::new(target, ratio, Node { l: 0, m: 0 }, 1)
    }

    fn new(target: &Exact, first: Fraction, step: Node, count: u64) -> Self {
        let mut rung = Self {
            first,
            step,
            count,
            first_residual: residual(&first, target),
            last_residual: 0.0,
        };
        rung.last_residual = residual(&rung.last(), target);
        rung
    }
}

/// The ladder of `target` within `bounds`, from the simplest ratio to the nearest.
///
/// # Examples
/// ```
/// use ratewright_ratio::{Bounds, Exact, Fraction, ladder};
/// let rungs = ladder(&Exact::new(160, 147), &Bounds::new(256, 256)?);
/// assert_eq!(rungs.first().map(|rung| rung.first), Some(Fraction::new(1, 1)));
/// assert_eq!(rungs.last().map(|rung| rung.last()), Some(Fraction::new(160, 147)));
/// assert!(rungs.iter().all(|rung| rung.last_residual.abs() <= rung.first_residual.abs()));
/// # Ok::<(), ratewright_ratio::BoundsError>(())
/// ```
pub fn ladder(target: &Exact, bounds: &Bounds) -> Vec<Rung> {
    if bounds.largest_prime().is_some() {
        // One run for each ratio; M as the cost.
        return front(target, bounds, |_, m| m)
            .map(|point| Rung::single(target, point.ratio))
            .collect();
    }
    runs(target, bounds)
}

/// The ladder of `target` within a region, from the simplest ratio to the nearest.
///
/// # Examples
/// ```
/// use ratewright_ratio::{Exact, Region, best_in, ladder_in};
/// let (target, region) = (Exact::new(160, 147), Region::product(1_000)?);
/// let last = ladder_in(&target, &region).last().map(|rung| rung.last());
/// assert_eq!(last, Some(best_in(&target, &region).ratio));
/// # Ok::<(), ratewright_ratio::RegionError>(())
/// ```
pub fn ladder_in(target: &Exact, region: &Region) -> Vec<Rung> {
    runs(target, region)
}

fn runs(target: &Exact, set: &impl DownClosed) -> Vec<Rung> {
    let mut rungs = Vec::new();
    let mut new_below = false;
    descend(*target.numer(), *target.denom(), set, |run| {
        let (from, step) = (run.from.0, run.step.0);
        let at = |j: u64| Node {
            l: from.l + j * step.l,
            m: from.m + j * step.m,
        };
        let improves = |j: u64| {
            step.fraction().is_none() || {
                let (below, above) = if new_below {
                    (step, at(j))
                } else {
                    (at(j), step)
                };
                let order = compare_distances(below, above, target);
                if new_below {
                    order.is_gt()
                } else {
                    order.is_lt()
                }
            }
        };
        // Distances shrink along a run, so the first that improves starts the tail.
        let (mut low, mut high) = (0, run.taken + 1);
        while high - low > 1 {
            let middle = low + (high - low) / 2;
            if improves(middle) {
                high = middle
            } else {
                low = middle
            }
        }
        if let Some(first) = at(high).fraction().filter(|_| high <= run.taken) {
            rungs.push(Rung::new(target, first, step, run.taken - high + 1));
        }
        new_below = !new_below;
    });
    rungs
}
