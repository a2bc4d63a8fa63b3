//! The narrow path: targets of 63 bits and bounds below 2^31, which is nearly every call.
//!
//! The same search as in [`crate::bracket`], with every product in one machine word, and with the end of the
//! search seen one division earlier.
//!
//! **Lemma.** With distances x, y of the last two convergents (p0, q0), (p1, q1) it is x·q1 + y·q0 = D, and
//! x·p1 + y·p0 = n. So the next convergent has y·q ≤ D and y·p ≤ n, and is in the box for sure while
//! y > D/Q and y > n/P, which is known before the first step. After that the longest run j that the box
//! allows tells: the next convergent is outside iff (j + 1)·y ≤ x. Six times of seven it is.
//!
//! By the same lemma the distances of the two ends, each times the other's denominator, add up to D. So the
//! convergent with the distance y is the nearer one iff y times the other denominator is below D/2.

use std::hint::select_unpredictable;

use crate::bracket::{Bracket, Ends, Node};
use crate::{Best, Bounds, Certificate, Exact, Fraction};

/// Bits of the numerator and denominator of a narrow target, so that they are signed integers too, which
/// processors turn into doubles in one step.
pub(crate) const WIDTH: u32 = 63;

/// Bounds up to this are narrow.
const MAX_NARROW: u64 = (1 << 31) - 1;

/// The target's parts if they and both bounds are narrow.
#[inline]
pub(crate) fn parts(target: &Exact, bounds: &Bounds) -> Option<(u64, u64)> {
    let (n, d) = (*target.numer(), *target.denom());
    let is_narrow = (n | d) >> WIDTH == 0 && fits(bounds);
    is_narrow.then_some((n as u64, d as u64))
}

/// True if both bounds are narrow.
#[inline]
pub(crate) fn fits(bounds: &Bounds) -> bool {
    (bounds.max_l() | bounds.max_m()) <= MAX_NARROW
}

/// The two ends around n/D within narrow bounds, n and D below 2^[`WIDTH`]; D = 0 stands for an infinite target.
#[inline(always)]
fn descend(n: u64, d: u64, bounds: &Bounds) -> Ends<u64> {
    let (max_l, max_m) = (bounds.max_l(), bounds.max_m());
    let unsure = divide(n, max_l).0.max(divide(d, max_m).0);
    let (whole, rest) = divide(n, d);
    if whole > max_l {
        return Ends {
            convergent: (Node::INFINITY, d),
            semiconvergent: (Node { l: max_l, m: 1 }, n - max_l * d),
            convergent_below: false,
        };
    }
    let (mut old, mut new) = (Node::INFINITY, Node { l: whole, m: 1 });
    let (mut old_distance, mut new_distance) = (d, rest);
    let mut new_below = true;
    loop {
        if new_distance <= unsure {
            let run = last_run(old, new, max_l, max_m);
            if u128::from(new_distance) * u128::from(run + 1) <= u128::from(old_distance) {
                return Ends {
                    convergent: (new, new_distance),
                    semiconvergent: (after(old, run, new), old_distance - run * new_distance),
                    convergent_below: new_below,
                };
            }
        }
        let quotient = old_distance / new_distance;
        (old_distance, new_distance) = (new_distance, old_distance % new_distance);
        (old, new) = (new, after(old, quotient, new));
        new_below = !new_below;
    }
}

/// Quotient and remainder, without a division by a power of two: the D of a double, and many a bound.
#[inline(always)]
pub(crate) fn divide(x: u64, y: u64) -> (u64, u64) {
    if y.is_power_of_two() {
        return (x >> y.trailing_zeros(), x & (y - 1));
    }
    x.checked_div(y)
        .map_or((u64::MAX, 0), |quotient| (quotient, x % y))
}

/// `old + run·new` by components.
#[inline]
pub(crate) fn after(old: Node, run: u64, new: Node) -> Node {
    Node {
        l: old.l + run * new.l,
        m: old.m + run * new.m,
    }
}

/// The largest run that stays in the box, however long the quotient is.
#[inline]
fn last_run(old: Node, new: Node, max_l: u64, max_m: u64) -> u64 {
    let room = |bound: u64, from: u64, step: u64| u64::from((bound - from) as u32 / step as u32);
    let run = room(max_m, old.m, new.m);
    // Mostly M is what cuts short, and the second division is saved.
    if old.l + run * new.l <= max_l {
        run
    } else {
        room(max_l, old.l, new.l)
    }
}

/// The nearer end, ties to smaller M, then smaller L.
#[inline]
fn nearer(ends: &Ends<u64>, d: u64) -> Fraction {
    let ((near, near_distance), (far, _)) = (ends.convergent, ends.semiconvergent);
    let near_error = near_distance * far.m;
    let far_error = d - near_error;
    // No short cuts: each is a branch, and which end is nearer is as good as random.
    let is_smaller = (near.m < far.m) | ((near.m == far.m) & (near.l < far.l));
    let is_nearer = (near_error < far_error) | ((near_error == far_error) & is_smaller);
    let is_near = (far.l == 0) | (is_nearer & (near.l != 0) & (near.m != 0));
    let l = select_unpredictable(is_near, near.l, far.l);
    let m = select_unpredictable(is_near, near.m, far.m);
    Fraction::new_raw(l, m)
}

/// The nearest ratio to n/D within narrow bounds.
#[inline]
pub(crate) fn best(n: u64, d: u64, bounds: &Bounds) -> Best {
    let ends = descend(n, d, bounds);
    Best {
        ratio: nearer(&ends, d),
        certificate: Certificate::Nearest(ends.bracket()),
    }
}

/// The bracket of n/D within narrow bounds.
pub(crate) fn find(n: u64, d: u64, bounds: &Bounds) -> Bracket {
    descend(n, d, bounds).bracket()
}
