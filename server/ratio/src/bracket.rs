//! The bracket: the two fractions of a down-closed set that enclose a target with nothing between.
//!
//! **Theorem.** Let 𝒟 be a down-closed set of pairs (L, M), a/b < c/d two of its fractions (or the sentinels
//! 0/1 and 1/0) with bc − ad = 1 and (a + c, b + d) ∉ 𝒟. Then no fraction of 𝒟 lies strictly between them.
//!
//! **Proof.** The matrix with columns (a, b), (c, d) has determinant ±1, so a fraction strictly between is
//! (ia + jc)/(ib + jd) with integers i, j ≥ 1. Both of its parts are at least those of the mediant
//! (a + c, b + d); were it in 𝒟, so would be the mediant. ∎
//!
//! **Search.** Euclid's algorithm on n/D, jumping by whole partial quotients. Beside each convergent p/q it
//! keeps the distance |n·q − p·D|, which is Euclid's own remainder, so the nearer end is known without any
//! further division. Cost: one division a partial quotient, O(log min(bound, D)) of them.
//!
//! **Corner cases.** A target in 𝒟 is itself one end of the bracket, and the other end is its neighbour on
//! one side. A target below every fraction has the sentinel 0/1 below it; one above all has 1/0 above it.

use std::cmp::Ordering;
use std::hint::select_unpredictable;

use serde::{Deserialize, Serialize};

use crate::region::DownClosed;
use crate::{Exact, Fraction, wide};

/// A node of the Stern–Brocot tree: L/M in lowest terms, or one of the sentinels 0/1 and 1/0.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct Node {
    /// Numerator, a count of output samples; 0 only in the lower sentinel 0/1.
    pub l: u64,
    /// Denominator, a count of input samples; 0 only in the upper sentinel 1/0.
    pub m: u64,
}

impl Node {
    /// The sentinel below every ratio.
    pub const ZERO: Self = Self { l: 0, m: 1 };
    /// The sentinel above every ratio.
    pub const INFINITY: Self = Self { l: 1, m: 0 };

    /// The fraction, or `None` for a sentinel, which is never an answer.
    pub fn fraction(self) -> Option<Fraction> {
        (self.l != 0 && self.m != 0).then(|| Fraction::new_raw(self.l, self.m))
    }

    /// Compares a target n/D with this node, exactly.
    #[inline]
    pub(crate) fn compare_target(self, target: &Exact) -> Ordering {
        wide::compare(*target.numer(), *target.denom(), self.l, self.m)
    }
}

impl From<&Fraction> for Node {
    fn from(fraction: &Fraction) -> Self {
        Self {
            l: *fraction.numer(),
            m: *fraction.denom(),
        }
    }
}

impl std::fmt::Display for Node {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        write!(f, "{}/{}", self.l, self.m)
    }
}

/// Two neighbours with `below ≤ target ≤ above`, of which at most one equals the target.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct Bracket {
    /// The lower end a/b.
    pub below: Node,
    /// The upper end c/d.
    pub above: Node,
}

impl Bracket {
    /// True if `below ≤ target ≤ above`, compared exactly.
    #[inline]
    pub(crate) fn encloses(&self, target: &Exact) -> bool {
        self.below.compare_target(target).is_ge() && self.above.compare_target(target).is_le()
    }
}

/// The arithmetic Euclid needs. Quotients beyond 64 bits saturate: every bound is below 2^63, so a longer
/// run is cut short all the same.
pub(crate) trait Magnitude: Clone {
    /// ⌊self / divisor⌋, saturated; `u64::MAX` if the divisor is zero (the run towards an exact target).
    fn quotient(&self, divisor: &Self) -> u64;
    /// self − j·other, which the caller knows to be non-negative.
    fn minus_times(&self, j: u64, other: &Self) -> Self;
}

impl Magnitude for u64 {
    #[inline]
    fn quotient(&self, divisor: &Self) -> u64 {
        self.checked_div(*divisor).unwrap_or(u64::MAX)
    }

    #[inline]
    fn minus_times(&self, j: u64, other: &Self) -> Self {
        self - j * other
    }
}

impl Magnitude for u128 {
    fn quotient(&self, divisor: &Self) -> u64 {
        self.checked_div(*divisor)
            .map_or(u64::MAX, |a| u64::try_from(a).unwrap_or(u64::MAX))
    }

    fn minus_times(&self, j: u64, other: &Self) -> Self {
        self - u128::from(j) * other
    }
}

/// Where the search ended: two neighbours, each with its distance |n·q − p·D|.
#[derive(Clone, Debug)]
pub(crate) struct Ends<T> {
    /// The later of the two, a convergent.
    pub(crate) convergent: (Node, T),
    /// The semiconvergent on the other side of the target.
    pub(crate) semiconvergent: (Node, T),
    /// True if the convergent is the lower end.
    pub(crate) convergent_below: bool,
}

impl<T> Ends<T> {
    #[inline]
    pub(crate) fn bracket(&self) -> Bracket {
        let (convergent, semiconvergent) = (self.convergent.0, self.semiconvergent.0);
        let pick = |a: Node, b: Node| Node {
            l: select_unpredictable(self.convergent_below, a.l, b.l),
            m: select_unpredictable(self.convergent_below, a.m, b.m),
        };
        Bracket {
            below: pick(convergent, semiconvergent),
            above: pick(semiconvergent, convergent),
        }
    }
}

/// One whole run of the search: the semiconvergents `from + j·step`, j = 1 ..= `taken` of `quotient`.
#[derive(Debug)]
pub(crate) struct Run<'a, T> {
    pub(crate) from: (Node, &'a T),
    pub(crate) step: (Node, &'a T),
    pub(crate) taken: u64,
}

/// Descends towards n/D inside `set`, calling `visit` for every run.
#[inline]
pub(crate) fn descend<T: Magnitude, S: DownClosed>(
    n: T,
    d: T,
    set: &S,
    mut visit: impl FnMut(Run<'_, T>),
) -> Ends<T> {
    // The distance of 0/1 is n, that of 1/0 is D.
    let (mut old, mut old_distance) = (Node::ZERO, n);
    let (mut new, mut new_distance) = (Node::INFINITY, d);
    let mut new_below = false;
    loop {
        let quotient = old_distance.quotient(&new_distance);
        let taken = set.longest_run(old.l, old.m, new.l, new.m, quotient);
        visit(Run {
            from: (old, &old_distance),
            step: (new, &new_distance),
            taken,
        });
        let reached = Node {
            l: old.l + taken * new.l,
            m: old.m + taken * new.m,
        };
        let distance = old_distance.minus_times(taken, &new_distance);
        if taken < quotient {
            return Ends {
                convergent: (new, new_distance),
                semiconvergent: (reached, distance),
                convergent_below: new_below,
            };
        }
        (old, old_distance) = (new, new_distance);
        (new, new_distance) = (reached, distance);
        new_below = !new_below;
    }
}

/// The bracket of n/D in `set`, in 64-bit arithmetic when the target allows it.
pub(crate) fn find<S: DownClosed>(target: &Exact, set: &S) -> Bracket {
    match (
        u64::try_from(*target.numer()),
        u64::try_from(*target.denom()),
    ) {
        (Ok(n), Ok(d)) => descend(n, d, set, |_| ()).bracket(),
        _ => descend(*target.numer(), *target.denom(), set, |_| ()).bracket(),
    }
}
