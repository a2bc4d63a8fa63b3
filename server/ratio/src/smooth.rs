//! Bounds on prime factors: L and M without a prime factor above B, as filter banks built in stages need.
//!
//! Such sets are not down-closed, so there is no bracket theorem and no short proof. They are closed under
//! divisors, though, so reducing a fraction never leaves them, and the sorted lists of allowed L and of
//! allowed M hold every answer.
//!
//! **Theorem.** A ratio above the target is beaten, in error and in both parts, unless its L is the smallest
//! allowed for its M; one below unless its M is the smallest allowed for its L. So those two lists of
//! candidates hold every nearest ratio, and the whole front for every cost.
//!
//! **Method.** Two pointers: M runs up its list while L follows target·M up its own, and the other way round.
//! Cost: the length of both lists (at most 2^20 each), after a sieve of the larger bound.
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
    let Candidates { below, above } = candidates(target, bounds);
    let higher = |a: Node, b: Node| if is_less(a, b) { b } else { a };
    let lower = |a: Node, b: Node| if is_less(b, a) { b } else { a };
    Bracket {
        below: below.into_iter().fold(Node::ZERO, higher),
        above: above.into_iter().fold(Node::INFINITY, lower),
    }
}

/// The ratios that may be nearest at their cost, as written, not reduced; those equal to the target are in
/// both lists, the one in lowest terms first.
#[derive(Debug)]
pub(crate) struct Candidates {
    /// For each allowed L the smallest allowed M with L/M ≤ target.
    pub(crate) below: Vec<Node>,
    /// For each allowed M the smallest allowed L with L/M ≥ target.
    pub(crate) above: Vec<Node>,
}

pub(crate) fn candidates(target: &Exact, bounds: &Bounds) -> Candidates {
    let allowed_l = smooth_numbers(bounds.max_l(), bounds.largest_prime());
    let allowed_m = smooth_numbers(bounds.max_m(), bounds.largest_prime());
    let below = follow(&allowed_l, &allowed_m, |l, m| {
        let node = Node { l, m };
        node.compare_target(target).is_ge().then_some(node)
    });
    let above = follow(&allowed_m, &allowed_l, |m, l| {
        let node = Node { l, m };
        node.compare_target(target).is_le().then_some(node)
    });
    Candidates { below, above }
}

/// For each leader the first follower that fits; as leaders grow, followers never step back.
fn follow(
    leaders: &[u64],
    followers: &[u64],
    fits: impl Fn(u64, u64) -> Option<Node>,
) -> Vec<Node> {
    let mut next = 0;
    let mut found = Vec::new();
    for &leader in leaders {
        while let Some(&follower) = followers.get(next) {
            if let Some(node) = fits(leader, follower) {
                found.push(node);
                break;
            }
            next += 1;
        }
    }
    found
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
