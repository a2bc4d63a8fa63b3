//! Best approximation of the first kind: the ratio with the least |target − L/M|.
//!
//! **Theorem.** In a down-closed set the nearest fraction is one of the two ends of the bracket
//! ([`crate::bracket`]), because nothing lies between them. With target n/D and ends a/b, c/d, put
//! e = n·b − a·D. The distances are e/(bD) and (D − e·d)/(dD), since bc − ad = 1; so a/b is strictly nearer
//! iff 2·e·d < D, and there is a tie iff 2·e·d = D. On a tie the smaller M is taken, then the smaller L.
//!
//! **Cost.** The search plus four multiplications; no division in the choice.
//!
//! **Corner cases.** A sentinel is never an answer: a target below 1/`max_m` gives 1/`max_m`, one above
//! `max_l` gives `max_l`/1. The first kind is not the second: the last convergent is often worse.
//! Best for t and best for 1/t can differ (1/t magnifies the distance on one side); this serves t.

use std::cmp::Ordering;
use std::hint::select_unpredictable;

use crate::bracket::{self, Bracket, Node};
use crate::outward::beyond;
use crate::wide::Wide;
use crate::{Bounds, Certificate, Exact, Fraction, Region, narrow, smooth};

/// An answer with the proof that nothing allowed is nearer.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Best {
    /// The nearest ratio L/M, in lowest terms.
    pub ratio: Fraction,
    /// Why it is the nearest.
    pub certificate: Certificate,
}

/// The nearest ratio to `target` within `bounds`; on a tie the smaller M, then the smaller L.
///
/// Certified as nearest, except with a largest prime factor when the nearest ratio of the whole box
/// breaks that bound: then the answer is exact still, but uncertified.
///
/// # Examples
/// ```
/// use ratewright_ratio::{Bounds, Exact, Fraction, best};
/// let bounds = Bounds::new(256, 256)?;
/// assert_eq!(best(&Exact::new(48_000, 44_100), &bounds).ratio, Fraction::new(160, 147));
/// // 2/1 and 1/1 are equally far from 3/2, and M is the same: the smaller L is taken.
/// assert_eq!(best(&Exact::new(3, 2), &Bounds::new(10, 1)?).ratio, Fraction::new(1, 1));
/// # Ok::<(), ratewright_ratio::BoundsError>(())
/// ```
pub fn best(target: &Exact, bounds: &Bounds) -> Best {
    if bounds.largest_prime().is_none()
        && let Some((n, d)) = narrow::parts(target, bounds)
    {
        return narrow::best(n, d, bounds);
    }
    best_of_any(target, bounds)
}

#[inline(never)]
fn best_of_any(target: &Exact, bounds: &Bounds) -> Best {
    let bracket = neighbours(target, bounds);
    let ratio = nearer(&bracket, target);
    if bounds.largest_prime().is_some() && !bounds.allow(&ratio) {
        return smooth::best(target, bounds);
    }
    Best {
        ratio,
        certificate: Certificate::Nearest(bracket),
    }
}

/// The nearest ratio to `target` in a region; on a tie the smaller M, then the smaller L.
///
/// # Examples
/// ```
/// use ratewright_ratio::{Exact, Fraction, Region, best_in};
/// // Near 160/147, but with at most 1000 for L·M.
/// let best = best_in(&Exact::new(160, 147), &Region::product(1_000)?);
/// assert_eq!(best.ratio, Fraction::new(25, 23));
/// # Ok::<(), ratewright_ratio::RegionError>(())
/// ```
pub fn best_in(target: &Exact, region: &Region) -> Best {
    let bracket = bracket::find(target, region);
    Best {
        ratio: nearer(&bracket, target),
        certificate: Certificate::Nearest(bracket),
    }
}

/// The two neighbours of `target` in the box of `bounds`: `below ≤ target ≤ above`, nothing of the box
/// between. A target in the box is one of the ends. Prime factors are not looked at.
///
/// # Examples
/// ```
/// use ratewright_ratio::{Bounds, Exact, Node, neighbours};
/// let bracket = neighbours(&Exact::new(9_999, 10_000), &Bounds::new(8, 8)?);
/// assert_eq!((bracket.below, bracket.above), (Node { l: 7, m: 8 }, Node { l: 1, m: 1 }));
/// // Nothing is above the largest ratio but the sentinel 1/0.
/// assert_eq!(neighbours(&Exact::new(9, 1), &Bounds::new(8, 8)?).above, Node::INFINITY);
/// # Ok::<(), ratewright_ratio::BoundsError>(())
/// ```
pub fn neighbours(target: &Exact, bounds: &Bounds) -> Bracket {
    if !narrow::fits(bounds) {
        return bracket::find(target, bounds);
    }
    // The leading 63 bits of a wide target nearly always lead to the same bracket, which one exact look
    // confirms: what makes a bracket does not depend on the target but that it lies between the ends.
    let (n, d) = (*target.numer(), *target.denom());
    let shift = (128 - narrow::WIDTH).saturating_sub((n | d).leading_zeros());
    let bracket = narrow::find((n >> shift) as u64, (d >> shift) as u64, bounds);
    if shift == 0 || bracket.encloses(target) {
        bracket
    } else {
        bracket::find(target, bounds)
    }
}

/// The largest ratio in `region` that is at most `target`; `None` if the target is below all of them.
/// Its certificate proves it with [`Side::Below`](crate::Side::Below).
pub fn best_below(target: &Exact, region: &Region) -> Option<Best> {
    let bracket = bracket::find(target, region);
    let exact = bracket.above.compare_target(target).is_eq();
    one_sided(bracket, if exact { bracket.above } else { bracket.below })
}

/// The smallest ratio in `region` that is at least `target`; `None` if the target is above all of them.
/// Its certificate proves it with [`Side::Above`](crate::Side::Above).
///
/// # Examples
/// ```
/// use ratewright_ratio::{Bounds, Claim, Exact, Fraction, Region, Side, best_above};
/// let (target, region) = (Exact::new(10_000, 10_001), Region::from(&Bounds::new(64, 64)?));
/// let answer = best_above(&target, &region).expect("1/1 is above it");
/// assert_eq!(answer.ratio, Fraction::new(1, 1));
/// let claim = Claim::Nearest { ratio: answer.ratio, target: &target, region, side: Side::Above };
/// assert_eq!(answer.certificate.verify(&claim), Ok(()));
/// # Ok::<(), ratewright_ratio::BoundsError>(())
/// ```
pub fn best_above(target: &Exact, region: &Region) -> Option<Best> {
    let bracket = bracket::find(target, region);
    let exact = bracket.below.compare_target(target).is_eq();
    one_sided(bracket, if exact { bracket.below } else { bracket.above })
}

fn one_sided(bracket: Bracket, end: Node) -> Option<Best> {
    end.fraction().map(|ratio| Best {
        ratio,
        certificate: Certificate::Nearest(bracket),
    })
}

/// The two neighbours of a target that is in the region itself: the ratios next below and next above it,
/// nothing of the region between either and the target. `None` if the target is not in the region;
/// the ends may be sentinels.
///
/// # Examples
/// ```
/// use ratewright_ratio::{Bounds, Exact, Node, Region, around};
/// let region = Region::from(&Bounds::new(8, 8)?);
/// let sides = around(&Exact::new(2, 3), &region).expect("2/3 is in the box");
/// assert_eq!((sides.below, sides.above), (Node { l: 5, m: 8 }, Node { l: 5, m: 7 }));
/// # Ok::<(), ratewright_ratio::BoundsError>(())
/// ```
pub fn around(target: &Exact, region: &Region) -> Option<Bracket> {
    let Bracket { below, above } = bracket::find(target, region);
    let is_target = |end: Node| end.fraction().is_some() && end.compare_target(target).is_eq();
    if is_target(above) {
        return Some(Bracket {
            below,
            above: beyond(region, below, above),
        });
    }
    is_target(below).then(|| Bracket {
        below: beyond(region, above, below),
        above,
    })
}

/// The end of a true bracket that is nearer to the target, ties to smaller M, then smaller L.
pub(crate) fn nearer(bracket: &Bracket, target: &Exact) -> Fraction {
    let (below, above) = (bracket.below, bracket.above);
    if below.fraction().is_none() || above.fraction().is_none() {
        return below
            .fraction()
            .or(above.fraction())
            .expect("every region holds 1/1, so one end is a ratio");
    }
    let order = compare_distances(below, above, target);
    let is_smaller = (below.m < above.m) | ((below.m == above.m) & (below.l < above.l));
    // Either end is as likely, so a branch would be mispredicted half of the time.
    let takes_low = (order as i8) < i8::from(is_smaller);
    let l = select_unpredictable(takes_low, below.l, above.l);
    let m = select_unpredictable(takes_low, below.m, above.m);
    Fraction::new_raw(l, m)
}

/// The nearer of any two ratios, ties to smaller M, then smaller L.
pub(crate) fn nearer_of(a: Fraction, b: Fraction, target: &Exact) -> Fraction {
    let order = compare_errors(a, b, target);
    let a_first = order.then((a.denom(), a.numer()).cmp(&(b.denom(), b.numer())));
    if a_first.is_le() { a } else { b }
}

/// Compares |target − a| with |target − b|, exactly.
pub(crate) fn compare_errors(a: Fraction, b: Fraction, target: &Exact) -> Ordering {
    if a > b {
        return compare_errors(b, a, target).reverse();
    }
    let (low, high) = (Node::from(&a), Node::from(&b));
    if high.compare_target(target).is_ge() {
        b.cmp(&a)
    } else if low.compare_target(target).is_le() {
        a.cmp(&b)
    } else {
        compare_distances(low, high, target)
    }
}

/// Compares `target − below` with `above − target`, given `below ≤ target ≤ above` and finite ends.
#[inline]
pub(crate) fn compare_distances(below: Node, above: Node, target: &Exact) -> Ordering {
    let (n, d) = (*target.numer(), *target.denom());
    let all = below.l | below.m | above.l | above.m;
    if (n | d) < 1 << 64 && all < 1 << 32 {
        // Distances below 2^96, which 2^32 more do not bring beyond 128 bits.
        let from_below = n * u128::from(below.m) - d * u128::from(below.l);
        let to_above = d * u128::from(above.l) - n * u128::from(above.m);
        return (from_below * u128::from(above.m)).cmp(&(to_above * u128::from(below.m)));
    }
    let from_below = Wide::product(n, below.m)
        .minus(Wide::product(d, below.l))
        .times(above.m);
    let to_above = Wide::product(d, above.l)
        .minus(Wide::product(n, above.m))
        .times(below.m);
    from_below.cmp(&to_above)
}
