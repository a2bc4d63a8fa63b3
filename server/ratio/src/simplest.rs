//! The simplest fraction in an interval: the one with the smallest M, which also has the smallest L.
//!
//! **Theorem.** A fraction f of an interval I is the simplest in I iff neither of its Stern–Brocot parents
//! l, r (f = l + r by components, determinant 1) is in I.
//!
//! **Proof.** I is convex and holds f but not l < f < r, so it lies strictly between l and r, and every
//! fraction there is i·l + j·r by components with i, j ≥ 1; the smallest is i = j = 1. Conversely a parent
//! in I would be simpler. ∎
//!
//! **Method.** If an integer is inside, the smallest such integer; else take off the common integer part a
//! of both ends, invert, and continue. Cost: one division a partial quotient of the lower end.
//!
//! **Corner cases.** An open end that is itself simple only bars that one fraction: in (1, 2) the answer is
//! 3/2. An interval of one point gives the point.

use std::hint::select_unpredictable;

use crate::bounds::MAX_BOUND;
use crate::bracket::Node;
use crate::narrow::{after, divide};
use crate::{Certificate, Fraction, Interval};
use serde::{Deserialize, Serialize};

/// The Stern–Brocot parents of a fraction: `left < f < right` and `f = left + right` by components.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct Parents {
    /// The parent below; may be the sentinel 0/1.
    pub left: Node,
    /// The parent above; may be the sentinel 1/0.
    pub right: Node,
}

/// The simplest fraction of an interval, with its proof.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Simplest {
    /// The fraction, in lowest terms.
    pub fraction: Fraction,
    /// Its parents, as a [`Certificate::Simplest`].
    pub certificate: Certificate,
}

/// The simplest fraction in the interval; `None` if even that needs a part above
/// [`MAX_BOUND`], in which case the interval holds no fraction with smaller parts at all.
///
/// # Examples
/// ```
/// use ratewright_ratio::{Exact, Fraction, Interval, simplest};
/// let simplest_of = |interval: &Interval| simplest(interval).map(|s| s.fraction);
/// let (one, two) = (Exact::new(1, 1), Exact::new(2, 1));
/// assert_eq!(simplest_of(&Interval::closed(one, two)?), Some(Fraction::new(1, 1)));
/// assert_eq!(simplest_of(&Interval::open(one, two)?), Some(Fraction::new(3, 2)));
/// # Ok::<(), ratewright_ratio::IntervalError>(())
/// ```
pub fn simplest(interval: &Interval) -> Option<Simplest> {
    let (lo, hi) = (interval.lo(), interval.hi());
    let [n1, d1, n2, d2] = [*lo.numer(), *lo.denom(), *hi.numer(), *hi.denom()];
    let flags = (interval.ends().low_closed(), interval.ends().high_closed());
    let all = n1 | d1 | n2 | d2;
    let parents = if all < 1 << 62 {
        narrow_search([n1 as u64, d1 as u64], [n2 as u64, d2 as u64], flags)
    } else {
        search([n1, d1], [n2, d2], flags)?
    };
    let (left, right) = (parents.left, parents.right);
    let fraction = Fraction::new_raw(left.l + right.l, left.m + right.m);
    Some(Simplest {
        fraction,
        certificate: Certificate::Simplest(parents),
    })
}

/// The parents of the simplest fraction between n1/d1 and n2/d2, parts below 2^62, ends in the interval as
/// flagged. Nothing overflows: no convergent on the way is larger than the answer, and the answer is at most
/// the mediant of the ends.
fn narrow_search(low: [u64; 2], high: [u64; 2], closed: (bool, bool)) -> Parents {
    let (mut old, mut new) = (Node::ZERO, Node::INFINITY);
    let mut new_above = true;
    // Quotients that both ends share are those of the lower end alone: the other end has the same one if that
    // leaves it a proper rest, which takes no division. Each division then waits for nothing but the last one.
    let ([mut x, mut y], [mut u, mut v]) = (low, high);
    loop {
        let (whole, rest) = divide(x, y);
        let taken = u128::from(whole) * u128::from(v);
        let other_rest = u128::from(u).wrapping_sub(taken);
        let is_proper = (other_rest.wrapping_sub(1) < u128::from(v - 1)) & (rest != 0);
        if !is_proper {
            break;
        }
        (old, new) = (new, after(old, whole, new));
        ([x, y], [u, v]) = ([y, rest], [v, other_rest as u64]);
        new_above = !new_above;
    }
    let state = State {
        old,
        new,
        new_above,
    };
    if new_above {
        end_of_search(state, [x, y], [u, v], closed)
    } else {
        end_of_search(state, [u, v], [x, y], (closed.1, closed.0))
    }
}

/// The last two convergents, and on which side the newer one is.
struct State {
    old: Node,
    new: Node,
    new_above: bool,
}

/// The same from any state of the search; nearly always, this is its last step.
#[inline(always)]
fn end_of_search(
    State {
        mut old,
        mut new,
        mut new_above,
    }: State,
    [mut n1, mut d1]: [u64; 2],
    [mut n2, mut d2]: [u64; 2],
    (mut low_closed, mut high_closed): (bool, bool),
) -> Parents {
    loop {
        let whole = n1 / d1;
        let (rest1, rest2) = (n1 - whole * d1, n2 - whole * d2);
        let takes_whole = low_closed & (rest1 == 0);
        // The next integer is inside if it is below n2/d2; a zero d2 stands for an infinite end.
        let takes_next = (rest2 > d2) | ((rest2 == d2) & high_closed);
        if takes_whole | takes_next {
            let steps = whole - u64::from(takes_whole);
            let nearer = Node {
                l: old.l + steps * new.l,
                m: old.m + steps * new.m,
            };
            let pick = |a: u64, b: u64| select_unpredictable(new_above, a, b);
            return Parents {
                left: Node {
                    l: pick(nearer.l, new.l),
                    m: pick(nearer.m, new.m),
                },
                right: Node {
                    l: pick(new.l, nearer.l),
                    m: pick(new.m, nearer.m),
                },
            };
        }
        (old, new) = (
            new,
            Node {
                l: old.l + whole * new.l,
                m: old.m + whole * new.m,
            },
        );
        ([n1, d1], [n2, d2]) = ([d2, rest2], [d1, rest1]);
        (low_closed, high_closed) = (high_closed, low_closed);
        new_above = !new_above;
    }
}

/// The same for any parts; `None` if the answer has a part beyond [`MAX_BOUND`].
fn search(
    [mut n1, mut d1]: [u128; 2],
    [mut n2, mut d2]: [u128; 2],
    (mut low_closed, mut high_closed): (bool, bool),
) -> Option<Parents> {
    let (mut old, mut new) = (Node::ZERO, Node::INFINITY);
    let mut new_above = true;
    loop {
        let whole = n1 / d1;
        let (rest1, rest2) = (n1 - whole * d1, n2 - whole * d2);
        let whole = u64::try_from(whole).ok()?;
        let takes_whole = low_closed && rest1 == 0;
        if takes_whole || rest2 > d2 || (rest2 == d2 && high_closed) {
            let nearer = forward(old, new, whole - u64::from(takes_whole))?;
            let (left, right) = if new_above {
                (nearer, new)
            } else {
                (new, nearer)
            };
            let in_range = left.l + right.l <= MAX_BOUND && left.m + right.m <= MAX_BOUND;
            return in_range.then_some(Parents { left, right });
        }
        (old, new) = (new, forward(old, new, whole)?);
        ([n1, d1], [n2, d2]) = ([d2, rest2], [d1, rest1]);
        (low_closed, high_closed) = (high_closed, low_closed);
        new_above = !new_above;
    }
}

/// `old + j·new` by components, `None` beyond [`MAX_BOUND`].
#[inline]
fn forward(old: Node, new: Node, j: u64) -> Option<Node> {
    let l = u128::from(old.l) + u128::from(j) * u128::from(new.l);
    let m = u128::from(old.m) + u128::from(j) * u128::from(new.m);
    let bound = u128::from(MAX_BOUND);
    (l <= bound && m <= bound).then_some(Node {
        l: l as u64,
        m: m as u64,
    })
}
