//! Bounds on prime factors: L and M without a prime factor above B, as filter banks built in stages need.
//!
//! Such sets are not down-closed, so there is no bracket theorem and no short proof. They are closed under
//! divisors, though, so reducing a fraction never leaves them, and the sorted lists of allowed L and of
//! allowed M hold every answer.
//!
//! **Method.** Two pointers: M runs up its list while L follows target·M up its own. Cost: the length of
//! both lists (at most 2^20 each), after a sieve of the larger bound.
//!
//! **Corner case.** 1/1 is always allowed, so there always is an answer.

use crate::bounds::is_smooth;
use crate::bracket::{Bracket, Node};
use crate::nearest::nearer;
use crate::{Best, Bounds, Certificate, Exact, Fraction, Reason};

/// The nearest ratio within bounds that include a largest prime factor.
pub(crate) fn best(target: &Exact, bounds: &Bounds) -> Best {
    let ratio = nearer(&neighbours(target, bounds), target);
    Best {
        ratio,
        certificate: Certificate::Uncertified(Reason::SmoothBounds),
    }
}

/// The allowed ratios nearest to the target on either side (or sentinels); equal ones are both ends.
pub(crate) fn neighbours(target: &Exact, bounds: &Bounds) -> Bracket {
    let mut nearest = Bracket {
        below: Node::ZERO,
        above: Node::INFINITY,
    };
    visit_flanks(target, bounds, |flanks| {
        if is_less(nearest.below, flanks.below) {
            nearest.below = flanks.below;
        }
        if is_less(flanks.above, nearest.above) {
            nearest.above = flanks.above;
        }
    });
    nearest
}

/// For every allowed M, ascending, the allowed L/M on either side of the target, reduced to lowest terms
/// only by what the caller makes of it; L is 0 or M is 0 where there is none.
pub(crate) fn visit_flanks(target: &Exact, bounds: &Bounds, mut visit: impl FnMut(Bracket)) {
    let allowed_l = smooth_numbers(bounds.max_l(), bounds.largest_prime());
    let mut next = 0;
    for m in smooth_numbers(bounds.max_m(), bounds.largest_prime()) {
        while next < allowed_l.len()
            && (Node {
                l: allowed_l[next],
                m,
            })
            .compare_target(target)
            .is_gt()
        {
            next += 1;
        }
        // allowed_l[next] is the first with L/M ≥ target.
        let above = allowed_l
            .get(next)
            .map_or(Node::INFINITY, |&l| Node { l, m });
        let exact = above.m != 0 && above.compare_target(target).is_eq();
        let below = if exact {
            above
        } else {
            next.checked_sub(1)
                .map_or(Node::ZERO, |i| Node { l: allowed_l[i], m })
        };
        visit(Bracket { below, above });
    }
}

/// The smallest and the largest ratio allowed.
pub(crate) fn extremes(bounds: &Bounds) -> (Fraction, Fraction) {
    let largest = |limit: u64| match bounds.largest_prime() {
        Some(p) => (1..=limit)
            .rev()
            .find(|&n| is_smooth(n, p))
            .expect("1 has no prime factor"),
        None => limit,
    };
    (
        Fraction::new_raw(1, largest(bounds.max_m())),
        Fraction::new_raw(largest(bounds.max_l()), 1),
    )
}

/// All numbers from 1 to `limit` without a prime factor above `largest_prime`, ascending.
pub(crate) fn smooth_numbers(limit: u64, largest_prime: Option<u64>) -> Vec<u64> {
    let limit = usize::try_from(limit).expect("bounds with a largest prime are at most 2^20");
    let largest_prime = largest_prime.unwrap_or(u64::MAX);
    let mut composite = vec![false; limit + 1];
    let mut smooth = vec![true; limit + 1];
    for n in 2..=limit {
        if composite[n] {
            continue;
        }
        let too_large = n as u64 > largest_prime;
        for multiple in (n..=limit).step_by(n) {
            composite[multiple] = multiple != n;
            smooth[multiple] &= !too_large;
        }
    }
    (1..=limit)
        .filter(|&n| smooth[n])
        .map(|n| n as u64)
        .collect()
}

fn is_less(a: Node, b: Node) -> bool {
    u128::from(a.l) * u128::from(b.m) < u128::from(b.l) * u128::from(a.m)
}
