//! M fixed, or a power of two: phase accumulators, whose M is the modulus of a counter.
//!
//! **Theorem.** For a fixed M the nearest L is t·M rounded to the nearest integer (a half goes down, to the
//! smaller L), held within 1 to `max_l`: the largest L with (2L − 1)·D < 2·n·M. For powers of two the grids
//! nest, so the finest grid on which that L is within the bound holds the nearest, or the next one, where L is
//! held at its bound; a tie's other side is on the grid before.
//!
//! **Proof.** |t − L/M| = |t·M − L|/M with M fixed, so the nearest integer to t·M is wanted. L/2^i is 2L/2^(i+1),
//! so each grid holds the coarser ones. ∎
//!
//! **Cost.** One division while n·M fits 64 bits; else a binary search with one product a step.
//! **Check.** [`is_nearest_for_m`] needs two comparisons of products.
//!
//! **Corner cases.** A target below 1/(2M) gives L = 1, never 0. L/M is not in lowest terms when M is fixed.

use crate::nearest::nearer_of;
use crate::wide::Wide;
use crate::{Bounds, Exact, Fraction};

/// The L from 1 to `max_l` that brings L/`m` nearest to `target`; a half goes to the smaller L.
/// `m` and `max_l` are from 1 to [`MAX_BOUND`](crate::MAX_BOUND), and are held to that.
///
/// # Examples
/// ```
/// use ratewright_ratio::{Exact, best_for_m};
/// assert_eq!(best_for_m(&Exact::new(160, 147), 1 << 16, 1 << 20), 71_332);
/// // A tie between 1/1 and 2/1 goes to the smaller.
/// assert_eq!(best_for_m(&Exact::new(3, 2), 1, 10), 1);
/// ```
pub fn best_for_m(target: &Exact, m: u64, max_l: u64) -> u64 {
    let (m, max_l) = held(m, max_l);
    if let Some(l) = rounded(target, m) {
        return l.clamp(1, max_l);
    }
    let (mut low, mut high) = (1, max_l + 1);
    while high - low > 1 {
        let middle = low + (high - low) / 2;
        if is_past_midpoint(target, middle, m) {
            low = middle
        } else {
            high = middle
        }
    }
    low
}

/// True if `l` is what [`best_for_m`] answers; multiplications only.
pub fn is_nearest_for_m(l: u64, target: &Exact, m: u64, max_l: u64) -> bool {
    let (m, max_l) = held(m, max_l);
    (1..=max_l).contains(&l)
        && (l == 1 || is_past_midpoint(target, l, m))
        && (l == max_l || !is_past_midpoint(target, l + 1, m))
}

/// The nearest ratio to `target` whose M, before reduction, is a power of two within `bounds`.
///
/// # Examples
/// ```
/// use ratewright_ratio::{Bounds, Exact, Fraction, best_power_of_two};
/// let bounds = Bounds::new(1 << 20, 65_535)?;
/// assert_eq!(best_power_of_two(&Exact::new(160, 147), &bounds), Fraction::new(35_666, 32_768));
/// # Ok::<(), ratewright_ratio::BoundsError>(())
/// ```
pub fn best_power_of_two(target: &Exact, bounds: &Bounds) -> Fraction {
    let on_grid = |bit: u32| {
        let m = 1 << bit;
        Fraction::new(best_for_m(target, m, bounds.max_l()), m)
    };
    // Finer is never worse until L meets its bound: below that, the first grid where it does is the last.
    let finest = bounds.max_m().ilog2();
    let is_held = |bit: u32| is_past_midpoint(target, bounds.max_l() + 1, 1 << bit);
    let last = (0..=finest).find(|&bit| is_held(bit)).unwrap_or(finest);
    // Of a tie on a grid, the ratio with the smaller M is rounded to on the grid before it.
    let candidates = (last.saturating_sub(2)..last).map(on_grid);
    candidates.fold(on_grid(last), |nearest, next| {
        nearer_of(nearest, next, target)
    })
}

/// Both held to what the arithmetic takes.
fn held(m: u64, max_l: u64) -> (u64, u64) {
    (
        m.clamp(1, crate::MAX_BOUND),
        max_l.clamp(1, crate::MAX_BOUND),
    )
}

/// t·m rounded, halves down, if it can be done in 64 bits.
#[inline]
fn rounded(target: &Exact, m: u64) -> Option<u64> {
    let scaled = u64::try_from(*target.numer()).ok()?.checked_mul(m)?;
    let d = u64::try_from(*target.denom()).ok()?;
    let (whole, rest) = (scaled.checked_div(d)?, scaled % d);
    whole.checked_add(u64::from(rest > d - rest))
}

/// True if l − 1/2 < t·m, that is (2l − 1)·D < 2m·n, for l up to 2^63 and m below.
fn is_past_midpoint(target: &Exact, l: u64, m: u64) -> bool {
    Wide::product(*target.denom(), l + (l - 1)) < Wide::product(*target.numer(), 2 * m)
}
