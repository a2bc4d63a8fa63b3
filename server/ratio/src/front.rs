//! The front: every ratio that is not beaten in both error and cost, for a cost of one's own.
//!
//! The [ladder](mod@crate::ladder) is the front for every cost at once. With one cost only (M, L + M, L·M, the
//! coefficients of the filter) some rungs fall out: those as dear as a nearer one.
//!
//! **Theorem.** For every cost that does not fall as L or M grows, the front is part of the ladder, because off
//! the ladder a ratio is beaten by one with smaller or equal parts. With a bound on prime factors the same
//! holds of the two lists of candidates of [`crate::smooth`]; sorted by cost, those that come nearer than all
//! before remain.
//!
//! **Cost.** A step of the iterator without a bound on prime factors; one sort with it.

use crate::nearest::compare_errors;
use crate::{Bounds, Exact, Fraction, Rung, kaiser, ladder, smooth};

/// A ratio of the front with its cost.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct FrontPoint {
    /// The ratio, in lowest terms.
    pub ratio: Fraction,
    /// Its cost, in the unit of the cost function.
    pub cost: u64,
}

/// The front of `target` within `bounds` (including a largest prime factor), from the cheapest ratio to the
/// nearest: each is dearer and strictly nearer than the one before.
///
/// `cost(l, m)` must not fall as L or M grows.
///
/// # Examples
/// ```
/// use ratewright_ratio::{Bounds, Exact, front, filter_coefficients};
/// let target = Exact::new(160, 147);
/// let cost = |l, m| filter_coefficients(l, m, 100.0, 0.1);
/// let front: Vec<_> = front(&target, &Bounds::new(256, 256)?, cost).collect();
/// assert!(front.windows(2).all(|pair| pair[0].cost < pair[1].cost));
/// assert_eq!(front.last().map(|point| point.cost), Some(cost(160, 147)));
/// # Ok::<(), ratewright_ratio::BoundsError>(())
/// ```
pub fn front<C: Fn(u64, u64) -> u64>(target: &Exact, bounds: &Bounds, cost: C) -> Front<C> {
    let runs = match bounds.largest_prime() {
        None => ladder(target, bounds),
        Some(_) => smooth_runs(target, bounds, &cost),
    };
    Front {
        runs: runs.into_iter(),
        run: None,
        index: 0,
        held: None,
        cost,
    }
}

/// The coefficients of a single polyphase filter for L/M: the length of its prototype by Kaiser's estimate,
/// for a stopband in dB and a transition of `relative_width` of the smaller rate's band ([`crate::kaiser`]).
pub fn filter_coefficients(l: u64, m: u64, stopband_db: f64, relative_width: f64) -> u64 {
    kaiser::prototype_taps(l, m, stopband_db, relative_width)
}

/// The iterator of [`front`].
#[derive(Debug)]
pub struct Front<C> {
    runs: std::vec::IntoIter<Rung>,
    run: Option<Rung>,
    index: u64,
    held: Option<FrontPoint>,
    cost: C,
}

impl<C: Fn(u64, u64) -> u64> Iterator for Front<C> {
    type Item = FrontPoint;

    fn next(&mut self) -> Option<FrontPoint> {
        // A point is given out once a dearer one is known: until then a nearer one may cost the same.
        while let Some(ratio) = self.next_ratio() {
            let cost = (self.cost)(*ratio.numer(), *ratio.denom());
            let previous = self.held.replace(FrontPoint { ratio, cost });
            if previous.is_some_and(|point| point.cost < cost) {
                return previous;
            }
        }
        self.held.take()
    }
}

impl<C> Front<C> {
    fn next_ratio(&mut self) -> Option<Fraction> {
        loop {
            if let Some(ratio) = self.run.and_then(|run| run.ratio(self.index)) {
                self.index += 1;
                return Some(ratio);
            }
            self.run = Some(self.runs.next()?);
            self.index = 0;
        }
    }
}

/// The ratios with smooth parts that come nearer than all cheaper ones, each as a run of its own.
fn smooth_runs(target: &Exact, bounds: &Bounds, cost: &impl Fn(u64, u64) -> u64) -> Vec<Rung> {
    let smooth::Candidates { below, above } = smooth::candidates(target, bounds);
    let key = |ratio: &Fraction| {
        (
            cost(*ratio.numer(), *ratio.denom()),
            *ratio.denom(),
            *ratio.numer(),
        )
    };
    let ratios = below
        .into_iter()
        .chain(above)
        .map(|node| Fraction::new(node.l, node.m));
    let mut candidates: Vec<Fraction> = ratios.collect();
    candidates.sort_by_cached_key(key);
    let mut nearest: Option<Fraction> = None;
    candidates.retain(|&ratio| {
        let comes_nearer = nearest.is_none_or(|best| compare_errors(ratio, best, target).is_lt());
        if comes_nearer {
            nearest = Some(ratio);
        }
        comes_nearer
    });
    candidates
        .into_iter()
        .map(|ratio| Rung::single(target, ratio))
        .collect()
}
