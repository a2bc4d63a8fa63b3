//! The bounds of a filter bank: how large L and M may be.
//!
//! L is the number of filter phases and M the input samples of a block, so both are bounded by memory and by
//! delay. The pairs within bounds of L and M alone are *down-closed*: with a pair they hold every smaller pair, which
//! is all that the [bracket theorem](crate::bracket) asks for. With a largest prime factor they are not (with 3, 8/1 is
//! allowed and 7/1 is not), and [`crate::smooth`] serves them.
//!
//! **Cost.** A comparison each; a largest prime factor is checked by trial division, at most √n steps.
//!
//! **Corner cases.** 1/1 is within all bounds. A bound is at most 2^63 − 1, so that the mediant of two ratios always
//! fits 64 bits.

use serde::{Deserialize, Serialize};
use thiserror::Error;

use crate::Fraction;

/// Largest bound accepted for L or M: 2^63 − 1, so that the sum of two numerators fits 64 bits.
pub const MAX_BOUND: u64 = i64::MAX as u64;

/// Largest bound accepted together with a largest prime factor: 2^20.
pub const MAX_SMOOTH_BOUND: u64 = 1 << 20;

/// Bounds of L and M, dimensionless counts: 1 ≤ L ≤ `max_l`, 1 ≤ M ≤ `max_m`, and, if wanted, no prime
/// factor of L or M above `largest_prime` (filter banks built in stages need that).
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, Serialize, Deserialize)]
#[serde(try_from = "Unchecked", into = "Unchecked")]
pub struct Bounds {
    max_l: u64,
    max_m: u64,
    largest_prime: Option<u64>,
}

/// Why bounds were refused.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Error)]
pub enum BoundsError {
    /// A bound of zero, or beyond [`MAX_BOUND`].
    #[error("{field} is {value}; accepted are 1 to {MAX_BOUND}")]
    OutOfRange {
        /// `max_l` or `max_m`.
        field: &'static str,
        /// The refused value.
        value: u64,
    },
    /// A largest prime factor below 2.
    #[error("largest_prime is {value}; accepted are 2 and above")]
    NoPrime {
        /// The refused value.
        value: u64,
    },
    /// Bounds beyond [`MAX_SMOOTH_BOUND`] together with a largest prime factor.
    #[error("{field} is {value}, but with a largest prime accepted are 1 to {MAX_SMOOTH_BOUND}")]
    TooWideForSmooth {
        /// `max_l` or `max_m`.
        field: &'static str,
        /// The refused value.
        value: u64,
    },
}

impl Bounds {
    /// L up to `max_l` and M up to `max_m`, both from 1 to [`MAX_BOUND`].
    ///
    /// # Errors
    /// [`BoundsError::OutOfRange`] names the bound that is not.
    ///
    /// # Examples
    /// ```
    /// use ratewright_ratio::{Bounds, Fraction};
    /// let bounds = Bounds::new(256, 128)?;
    /// assert!(bounds.allow(&Fraction::new(160, 127)) && !bounds.allow(&Fraction::new(160, 147)));
    /// // 147 = 3·7·7, but 127 is a prime.
    /// let bounds = Bounds::new(256, 256)?.with_largest_prime(7)?;
    /// assert!(bounds.allow(&Fraction::new(160, 147)) && !bounds.allow(&Fraction::new(160, 127)));
    /// # Ok::<(), ratewright_ratio::BoundsError>(())
    /// ```
    pub fn new(max_l: u64, max_m: u64) -> Result<Self, BoundsError> {
        for (field, value) in [("max_l", max_l), ("max_m", max_m)] {
            if !(1..=MAX_BOUND).contains(&value) {
                return Err(BoundsError::OutOfRange { field, value });
            }
        }
        Ok(Self {
            max_l,
            max_m,
            largest_prime: None,
        })
    }

    /// The same bounds, with no prime factor of L or M above `largest_prime`.
    ///
    /// # Errors
    /// [`BoundsError::NoPrime`] below 2; [`BoundsError::TooWideForSmooth`] if a bound is beyond [`MAX_SMOOTH_BOUND`].
    pub fn with_largest_prime(self, largest_prime: u64) -> Result<Self, BoundsError> {
        if largest_prime < 2 {
            return Err(BoundsError::NoPrime {
                value: largest_prime,
            });
        }
        for (field, value) in [("max_l", self.max_l), ("max_m", self.max_m)] {
            if value > MAX_SMOOTH_BOUND {
                return Err(BoundsError::TooWideForSmooth { field, value });
            }
        }
        Ok(Self {
            largest_prime: Some(largest_prime),
            ..self
        })
    }

    /// The largest L.
    #[inline]
    pub fn max_l(&self) -> u64 {
        self.max_l
    }

    /// The largest M.
    #[inline]
    pub fn max_m(&self) -> u64 {
        self.max_m
    }

    /// The largest prime factor allowed in L and M, if there is such a bound.
    #[inline]
    pub fn largest_prime(&self) -> Option<u64> {
        self.largest_prime
    }

    /// The bounds of L and M alone.
    pub fn without_largest_prime(self) -> Self {
        Self {
            largest_prime: None,
            ..self
        }
    }

    /// True if L/M, as it is written, keeps all the bounds.
    pub fn allow(&self, ratio: &Fraction) -> bool {
        let (l, m) = (*ratio.numer(), *ratio.denom());
        let in_box = (1..=self.max_l).contains(&l) && (1..=self.max_m).contains(&m);
        in_box
            && self
                .largest_prime
                .is_none_or(|p| is_smooth(l, p) && is_smooth(m, p))
    }
}

/// True if no prime factor of `n` ≥ 1 is above `largest_prime`. Trial division: at most √n steps.
pub(crate) fn is_smooth(mut n: u64, largest_prime: u64) -> bool {
    n >>= n.trailing_zeros();
    let mut factor = 3;
    while factor <= largest_prime && factor <= n / factor {
        while n.is_multiple_of(factor) {
            n /= factor;
        }
        factor += 2;
    }
    // What is left is 1, a prime, or free of factors up to the bound and at least its square.
    n <= largest_prime
}

#[derive(Serialize, Deserialize)]
struct Unchecked {
    max_l: u64,
    max_m: u64,
    largest_prime: Option<u64>,
}

impl TryFrom<Unchecked> for Bounds {
    type Error = BoundsError;

    fn try_from(raw: Unchecked) -> Result<Self, BoundsError> {
        let bounds = Self::new(raw.max_l, raw.max_m)?;
        raw.largest_prime
            .map_or(Ok(bounds), |p| bounds.with_largest_prime(p))
    }
}

impl From<Bounds> for Unchecked {
    fn from(bounds: Bounds) -> Self {
        let Bounds {
            max_l,
            max_m,
            largest_prime,
        } = bounds;
        Self {
            max_l,
            max_m,
            largest_prime,
        }
    }
}
