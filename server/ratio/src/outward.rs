//! Walking outwards from the target: every ratio of the box, nearest first, for constraints of any kind.
//!
//! **Theorem.** If a/b and c/d are neighbours in a box, the next fraction beyond a/b on the far side of c/d is
//! (k·a − c)/(k·b − d) with the largest k that keeps it in the box, as in a Farey sequence: all fractions with
//! determinant 1 against a/b on that side have that form, and the one with the largest parts is the nearest.
//!
//! **Cost.** Two divisions a step; a predicate of density ρ is met after about 1/ρ steps.
//! The whole front under a predicate is what is cheaper than all before it on the walk:
//! ```
//! use ratewright_ratio::{Bounds, Exact, Fraction, outward};
//! let mut cheapest = u64::MAX;
//! let odd = outward(&Exact::new(160, 147), &Bounds::new(64, 64)?).filter(|ratio| ratio.numer() % 2 == 1);
//! let front: Vec<Fraction> = odd
//!     .filter(|ratio| {
//!         let cost = ratio.numer() + ratio.denom();
//!         let is_cheaper = cost < cheapest;
//!         cheapest = cheapest.min(cost);
//!         is_cheaper
//!     })
//!     .collect();
//! assert_eq!(front.last(), Some(&Fraction::new(1, 1)));
//! # Ok::<(), ratewright_ratio::BoundsError>(())
//! ```
//! Answers found this way are nearest by construction, and uncertified:
//! [`Reason::Predicate`](crate::Reason::Predicate).

use crate::bracket::{self, Bracket, Node};
use crate::nearest::nearer;
use crate::region::DownClosed;
use crate::{Bounds, Exact, Fraction};

/// Every ratio within the bounds of L and M (prime factors are not looked at), from the nearest to the
/// farthest; ties give the smaller M first, then the smaller L.
///
/// # Examples
/// The nearest ratio to 44.1 → 48 kHz with an odd L and no common factor with 3:
/// ```
/// use ratewright_ratio::{Bounds, Exact, Fraction, outward};
/// let mut ratios = outward(&Exact::new(160, 147), &Bounds::new(64, 64)?);
/// let wanted = |ratio: &Fraction| ratio.numer() % 2 == 1 && ratio.numer() % 3 != 0;
/// assert_eq!(ratios.find(wanted), Some(Fraction::new(37, 34)));
/// # Ok::<(), ratewright_ratio::BoundsError>(())
/// ```
pub fn outward(target: &Exact, bounds: &Bounds) -> Outward {
    let Bracket { below, above } = bracket::find(target, bounds);
    Outward {
        target: *target,
        bounds: *bounds,
        below: (below, above),
        above: (above, below),
    }
}

/// The iterator of [`outward`].
#[derive(Clone, Debug)]
pub struct Outward {
    target: Exact,
    bounds: Bounds,
    /// The next ratio below, and its neighbour towards the target.
    below: (Node, Node),
    /// The next ratio above, and its neighbour towards the target.
    above: (Node, Node),
}

impl Iterator for Outward {
    type Item = Fraction;

    fn next(&mut self) -> Option<Fraction> {
        let (below, above) = (self.below.0, self.above.0);
        let take_below = match (below.fraction(), above.fraction()) {
            (None, None) => return None,
            (None, Some(_)) => false,
            (Some(_), None) => true,
            (Some(low), Some(_)) => nearer(&Bracket { below, above }, &self.target) == low,
        };
        let side = if take_below {
            &mut self.below
        } else {
            &mut self.above
        };
        let taken = side.0;
        *side = (beyond(&self.bounds, side.1, side.0), side.0);
        taken.fraction()
    }
}

/// The neighbour of `at` in a down-closed set, on the side away from its neighbour `other`.
pub(crate) fn beyond(set: &impl DownClosed, other: Node, at: Node) -> Node {
    // The smallest k that leaves no part negative, then as many more as the set allows.
    let parts = [(other.l, at.l), (other.m, at.m)];
    let least = |(of, by): (u64, u64)| if by == 0 { 0 } else { of.div_ceil(by) };
    let k = parts.map(least).into_iter().max().unwrap_or(0);
    let start = Node {
        l: k * at.l - other.l,
        m: k * at.m - other.m,
    };
    let more = set.longest_run(start.l, start.m, at.l, at.m, u64::MAX);
    Node {
        l: start.l + more * at.l,
        m: start.m + more * at.m,
    }
}
