//! L or M a multiple of k, as a resampler needs that works in chunks or has k interleaved filters.
//!
//! **Theorem.** With L = k·l the error is |t − kl/M| = k·|t/k − l/M|, so the nearest L/M is k times the nearest
//! l/M to t/k with l ≤ ⌊`max_l`/k⌋; and with M = k·m it is the nearest L/m to t·k, with m ≤ ⌊`max_m`/k⌋,
//! divided by k. The certificate is that of the smaller problem, which the answer carries.
//!
//! The same scaling turns the [ladder](mod@crate::ladder) of the smaller problem into that of the multiples.
//!
//! **Cost.** The search in the box.
//!
//! **Corner case.** L/M need not be in lowest terms then: 320/294 is an answer for multiples of 320.
//! Ties go to the smaller M, then the smaller L.

use thiserror::Error;

use crate::{Best, Bounds, Exact, best};

/// Which part has to be a multiple, and of what.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Multiple {
    /// L is a multiple of this, positive.
    OfL(u64),
    /// M is a multiple of this, positive.
    OfM(u64),
}

/// The nearest L/M of which one part is a multiple.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct MultipleBest {
    /// Output samples a block.
    pub l: u64,
    /// Input samples a block.
    pub m: u64,
    /// The smaller problem's target: t/k or t·k.
    pub target: Exact,
    /// The smaller problem's bounds.
    pub bounds: Bounds,
    /// The smaller problem's answer, with its certificate.
    pub reduced: Best,
}

/// Why there is no such ratio.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Error)]
pub enum MultipleError {
    /// No multiple is within the bound.
    #[error(
        "{field} must be a multiple of {k}, but is at most {bound}; accepted are k from 1 to {bound}"
    )]
    BeyondBound {
        /// `l` or `m`.
        field: &'static str,
        /// The wanted factor.
        k: u64,
        /// The bound of that part.
        bound: u64,
    },
    /// t/k or t·k needs more than 128 bits.
    #[error(
        "target {target} with k = {k} needs more than 128 bits; accepted are targets with smaller parts"
    )]
    TooWide {
        /// The target.
        target: Exact,
        /// The wanted factor.
        k: u64,
    },
    /// Multiples together with a bound on prime factors are not served.
    #[error(
        "largest_prime is {largest_prime}; accepted with a multiple is no bound on prime factors"
    )]
    Smooth {
        /// The refused bound.
        largest_prime: u64,
    },
}

/// The nearest ratio to `target` within `bounds` of which a part is a multiple.
///
/// # Errors
/// [`MultipleError`].
///
/// # Examples
/// ```
/// use ratewright_ratio::{Bounds, Exact, Multiple, best_multiple};
/// let answer = best_multiple(&Exact::new(160, 147), Multiple::OfL(320), &Bounds::new(400, 400)?)?;
/// assert_eq!((answer.l, answer.m), (320, 294));
/// # Ok::<(), Box<dyn std::error::Error>>(())
/// ```
pub fn best_multiple(
    target: &Exact,
    multiple: Multiple,
    bounds: &Bounds,
) -> Result<MultipleBest, MultipleError> {
    if let Some(largest_prime) = bounds.largest_prime() {
        return Err(MultipleError::Smooth { largest_prime });
    }
    let (field, k, bound) = match multiple {
        Multiple::OfL(k) => ("l", k, bounds.max_l()),
        Multiple::OfM(k) => ("m", k, bounds.max_m()),
    };
    if !(1..=bound).contains(&k) {
        return Err(MultipleError::BeyondBound { field, k, bound });
    }
    let too_wide = MultipleError::TooWide { target: *target, k };
    let target = scaled(target, multiple).ok_or(too_wide)?;
    let (max_l, max_m) = match multiple {
        Multiple::OfL(k) => (bounds.max_l() / k, bounds.max_m()),
        Multiple::OfM(k) => (bounds.max_l(), bounds.max_m() / k),
    };
    let bounds =
        Bounds::new(max_l, max_m).expect("k is at most the bound, so the quotient is at least 1");
    let reduced = best(&target, &bounds);
    let (l, m) = (*reduced.ratio.numer(), *reduced.ratio.denom());
    let (l, m) = match multiple {
        Multiple::OfL(k) => (l * k, m),
        Multiple::OfM(k) => (l, m * k),
    };
    Ok(MultipleBest {
        l,
        m,
        target,
        bounds,
        reduced,
    })
}

/// t/k or t·k, in lowest terms as far as that is needed to fit.
fn scaled(target: &Exact, multiple: Multiple) -> Option<Exact> {
    let t = target.reduced();
    let (n, d) = (*t.numer(), *t.denom());
    match multiple {
        Multiple::OfL(k) => {
            let scaled = Exact::new(n, u128::from(k));
            Some(Exact::new_raw(
                *scaled.numer(),
                scaled.denom().checked_mul(d)?,
            ))
        }
        Multiple::OfM(k) => {
            let scaled = Exact::new(u128::from(k), d);
            Some(Exact::new_raw(
                scaled.numer().checked_mul(n)?,
                *scaled.denom(),
            ))
        }
    }
}
