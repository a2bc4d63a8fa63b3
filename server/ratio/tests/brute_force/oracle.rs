//! Answers by looking at every ratio. Slow and plain on purpose; targets below 2^101, parts below 2^10.

use std::cmp::Ordering;

use num_integer::Integer;
use ratewright_ratio::{Exact, Fraction};

/// All reduced ratios that are allowed, with parts up to `max`.
pub(crate) fn allowed(max_l: u64, max_m: u64, allow: impl Fn(u64, u64) -> bool) -> Vec<Fraction> {
    let pairs = (1..=max_m).flat_map(|m| (1..=max_l).map(move |l| (l, m)));
    let wanted = pairs.filter(|&(l, m)| l.gcd(&m) == 1 && allow(l, m));
    wanted.map(|(l, m)| Fraction::new(l, m)).collect()
}

/// |target − L/M|·D·M as an integer.
fn error(target: &Exact, ratio: &Fraction) -> u128 {
    let wanted = *target.numer() * u128::from(*ratio.denom());
    (*target.denom() * u128::from(*ratio.numer())).abs_diff(wanted)
}

/// Compares the errors of two ratios.
pub(crate) fn compare(target: &Exact, a: &Fraction, b: &Fraction) -> Ordering {
    let left = error(target, a) * u128::from(*b.denom());
    left.cmp(&(error(target, b) * u128::from(*a.denom())))
}

/// The nearest; ties to smaller M, then smaller L.
pub(crate) fn nearest(target: &Exact, ratios: &[Fraction]) -> Fraction {
    let order = |a: &&Fraction, b: &&Fraction| {
        compare(target, a, b)
            .then(a.denom().cmp(b.denom()))
            .then(a.numer().cmp(b.numer()))
    };
    *ratios.iter().min_by(order).expect("1/1 is allowed")
}

/// The nearest with parts up to the bounds: for each M the two L on either side of target·M.
pub(crate) fn nearest_over_all_denominators(target: &Exact, max_l: u64, max_m: u64) -> Fraction {
    let mut nearest = Fraction::new_raw(1, 1);
    for m in 1..=max_m {
        let floor = *target.numer() * u128::from(m) / *target.denom();
        for l in [floor, floor + 1] {
            let l = l.clamp(1, u128::from(max_l)) as u64;
            let candidate = Fraction::new_raw(l, m);
            // M ascends, and L within an M, so a tie keeps the earlier: the smaller.
            if compare(target, &candidate, &nearest).is_lt() {
                nearest = candidate;
            }
        }
    }
    nearest
}

/// Compares a ratio with the target.
pub(crate) fn side(ratio: &Fraction, target: &Exact) -> Ordering {
    let made = *target.denom() * u128::from(*ratio.numer());
    made.cmp(&(*target.numer() * u128::from(*ratio.denom())))
}

/// The largest ratio at most the target, and the smallest at least the target.
pub(crate) fn flanks(target: &Exact, ratios: &[Fraction]) -> (Option<Fraction>, Option<Fraction>) {
    let below = ratios
        .iter()
        .filter(|ratio| side(ratio, target).is_le())
        .max();
    let above = ratios
        .iter()
        .filter(|ratio| side(ratio, target).is_ge())
        .min();
    (below.copied(), above.copied())
}

/// True if no prime factor is above `largest`.
pub(crate) fn is_smooth(n: u64, largest: u64) -> bool {
    (2..=n).all(|p| !n.is_multiple_of(p) || (2..p).any(|d| p.is_multiple_of(d)) || p <= largest)
}
