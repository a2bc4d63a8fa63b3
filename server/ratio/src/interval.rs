//! Intervals of ratios with exact ends, each closed or open.
//!
//! An interval is what is known of a target: bounds of two drifts give it, and [`mod@crate::simplest`] finds the
//! ratio to hold inside it.
//!
//! **Cost.** Two comparisons of products, in 64-bit words while the ends fit them.
//!
//! **Corner cases.** One point is an interval if both ends are closed. Zero may be an open lower end, but is never
//! inside: it is no ratio.

use serde::{Deserialize, Serialize};
use thiserror::Error;

use crate::{Exact, Fraction};

/// Which ends of an interval belong to it.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Ends {
    /// `[lo, hi]`.
    Closed,
    /// `(lo, hi)`.
    Open,
    /// `(lo, hi]`.
    LowOpen,
    /// `[lo, hi)`.
    HighOpen,
}

impl Ends {
    /// True if the lower end belongs to the interval.
    pub fn low_closed(self) -> bool {
        matches!(self, Self::Closed | Self::HighOpen)
    }

    /// True if the upper end belongs to the interval.
    pub fn high_closed(self) -> bool {
        matches!(self, Self::Closed | Self::LowOpen)
    }
}

/// A non-empty interval of positive ratios, dimensionless.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[serde(try_from = "Unchecked", into = "Unchecked")]
pub struct Interval {
    lo: Exact,
    hi: Exact,
    ends: Ends,
}

/// Why an interval was refused.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Error)]
pub enum IntervalError {
    /// A denominator of zero.
    #[error("{field} has the denominator 0; accepted are finite fractions")]
    ZeroDenominator {
        /// `lo` or `hi`.
        field: &'static str,
    },
    /// Zero is not a ratio.
    #[error("lo is 0 and belongs to the interval; accepted are lo above 0, or 0 as an open end")]
    HoldsZero,
    /// No number is inside.
    #[error(
        "the interval from lo = {lo} to hi = {hi} is empty; accepted are lo < hi, or lo = hi with both ends closed"
    )]
    Empty {
        /// The lower end.
        lo: Exact,
        /// The upper end.
        hi: Exact,
    },
}

impl Interval {
    /// The interval from `lo` to `hi`.
    ///
    /// # Errors
    /// [`IntervalError`] if it is empty, holds zero, or an end is not finite.
    ///
    /// # Examples
    /// ```
    /// use ratewright_ratio::{Ends, Exact, Fraction, Interval};
    /// let (lo, hi) = (Exact::new(1, 2), Exact::new(2, 1));
    /// let interval = Interval::new(lo, hi, Ends::HighOpen)?;
    /// assert!(interval.contains(&Fraction::new(1, 2)) && !interval.contains(&Fraction::new(2, 1)));
    /// assert!(Interval::new(lo, lo, Ends::Open).is_err() && Interval::closed(lo, lo).is_ok());
    /// # Ok::<(), ratewright_ratio::IntervalError>(())
    /// ```
    pub fn new(lo: Exact, hi: Exact, ends: Ends) -> Result<Self, IntervalError> {
        for (field, end) in [("lo", lo), ("hi", hi)] {
            if *end.denom() == 0 {
                return Err(IntervalError::ZeroDenominator { field });
            }
        }
        if *lo.numer() == 0 && ends.low_closed() {
            return Err(IntervalError::HoldsZero);
        }
        if lo > hi || (lo == hi && ends != Ends::Closed) {
            return Err(IntervalError::Empty { lo, hi });
        }
        Ok(Self { lo, hi, ends })
    }

    /// `[lo, hi]`.
    ///
    /// # Errors
    /// As [`Interval::new`].
    pub fn closed(lo: Exact, hi: Exact) -> Result<Self, IntervalError> {
        Self::new(lo, hi, Ends::Closed)
    }

    /// `(lo, hi)`.
    ///
    /// # Errors
    /// As [`Interval::new`].
    pub fn open(lo: Exact, hi: Exact) -> Result<Self, IntervalError> {
        Self::new(lo, hi, Ends::Open)
    }

    /// The lower end.
    pub fn lo(&self) -> &Exact {
        &self.lo
    }

    /// The upper end.
    pub fn hi(&self) -> &Exact {
        &self.hi
    }

    /// Which ends belong to it.
    pub fn ends(&self) -> Ends {
        self.ends
    }

    /// True if the fraction lies in the interval, compared exactly.
    pub fn contains(&self, fraction: &Fraction) -> bool {
        self.holds(*fraction.numer(), *fraction.denom())
    }

    /// The same for l/m where m may be zero (the sentinel 1/0, never inside).
    #[inline]
    pub(crate) fn holds(&self, l: u64, m: u64) -> bool {
        self.is_above_low(l, m) && self.is_below_high(l, m)
    }

    #[inline]
    pub(crate) fn is_above_low(&self, l: u64, m: u64) -> bool {
        let order = crate::exact::compare(&self.lo, l, m);
        order.is_lt() || (order.is_eq() && self.ends.low_closed())
    }

    #[inline]
    pub(crate) fn is_below_high(&self, l: u64, m: u64) -> bool {
        let order = crate::exact::compare(&self.hi, l, m);
        order.is_gt() || (order.is_eq() && self.ends.high_closed())
    }
}

#[derive(Serialize, Deserialize)]
struct Unchecked {
    lo: Exact,
    hi: Exact,
    ends: Ends,
}

impl TryFrom<Unchecked> for Interval {
    type Error = IntervalError;

    fn try_from(raw: Unchecked) -> Result<Self, IntervalError> {
        Self::new(raw.lo, raw.hi, raw.ends)
    }
}

impl From<Interval> for Unchecked {
    fn from(interval: Interval) -> Self {
        let Interval { lo, hi, ends } = interval;
        Self { lo, hi, ends }
    }
}
