//! Exact numbers: what a target is and how it is made.
//!
//! A target is the ratio of two true rates. The crate takes it as an exact fraction, because "nearest" and
//! "equal" are only then well defined: a double is read as the dyadic fraction that it is, never rounded again.
//!
//! **Sign.** residual = (L/M)/target − 1, formed in integers, so that its sign is exact and a 0.0 means equal.
//!
//! **Cost.** Shifts for a double; a greatest common divisor for two rates; four products for a residual.
//!
//! **Corner cases.** NaN, infinities, zero and negative numbers are refused. Subnormals and other doubles beyond 128
//! bits are refused here and served by [`crate::big`]. Fractions need not be in lowest terms.

use num_integer::Integer;
use num_rational::Ratio;
use thiserror::Error;

use crate::wide::{self, Wide};

/// A ratio L/M: L output samples for M input samples. In lowest terms and positive in every answer.
pub type Fraction = Ratio<u64>;

/// An exact target, dimensionless (sink rate over source rate), positive. Need not be reduced.
pub type Exact = Ratio<u128>;

/// Why a number cannot be a target.
#[derive(Clone, Copy, Debug, PartialEq, Error)]
pub enum TargetError {
    /// NaN, an infinity, zero or a negative number.
    #[error("target {value} is not a positive finite number")]
    NotPositive {
        /// The refused value.
        value: f64,
    },
    /// The exact dyadic fraction needs more than 128 bits above or below the line.
    #[error(
        "target {value:e} needs more than 128 bits as an exact fraction; accepted are doubles below 2^128 \
         whose last binary digit is worth at least 2^-127 (all from 2^-75 up are)"
    )]
    TooWide {
        /// The refused value.
        value: f64,
    },
    /// A rate of 0 Hz has no ratio.
    #[error("{field} is 0 Hz; accepted are positive rates")]
    ZeroRate {
        /// `source` or `sink`.
        field: &'static str,
    },
}

/// The double `x` as the exact dyadic fraction that it is, in lowest terms.
///
/// # Errors
/// [`TargetError::NotPositive`] for NaN, infinities and everything not above zero; [`TargetError::TooWide`]
/// if numerator or denominator would not fit 128 bits (then use [`crate::big`]).
///
/// # Examples
/// ```
/// use ratewright_ratio::{Exact, target_from_f64};
/// assert_eq!(target_from_f64(1.25), Ok(Exact::new(5, 4)));
/// assert!(target_from_f64(f64::NAN).is_err() && target_from_f64(5e-324).is_err());
/// ```
pub fn target_from_f64(x: f64) -> Result<Exact, TargetError> {
    if !(x.is_finite() && x > 0.0) {
        return Err(TargetError::NotPositive { value: x });
    }
    let (odd, exponent) = dyadic(x);
    let too_wide = TargetError::TooWide { value: x };
    if exponent >= 0 {
        let width = i64::from(64 - odd.leading_zeros()) + i64::from(exponent);
        if width > 128 {
            return Err(too_wide);
        }
        return Ok(Exact::new_raw(u128::from(odd) << exponent, 1));
    }
    if exponent < -127 {
        return Err(too_wide);
    }
    Ok(Exact::new_raw(u128::from(odd), 1 << -exponent))
}

/// A positive finite double as `odd · 2^exponent` with `odd` odd.
pub(crate) fn dyadic(x: f64) -> (u64, i32) {
    let bits = x.to_bits();
    let biased = ((bits >> 52) & 0x7ff) as i32;
    let fraction = bits & ((1 << 52) - 1);
    // Subnormals have no hidden bit and the exponent of the smallest normal number.
    let (mantissa, exponent) = if biased == 0 {
        (fraction, -1074)
    } else {
        (fraction | 1 << 52, biased - 1075)
    };
    let zeros = mantissa.trailing_zeros();
    (mantissa >> zeros, exponent + zeros as i32)
}

/// The target of a crossing between two exact rates in Hz: `sink / source`, in lowest terms.
///
/// # Errors
/// [`TargetError::ZeroRate`] if either rate is zero.
///
/// # Examples
/// ```
/// use num_rational::Ratio;
/// use ratewright_ratio::{Exact, target_from_rates};
/// let cd = Ratio::from_integer(44_100);
/// let studio = Ratio::from_integer(48_000);
/// assert_eq!(target_from_rates(cd, studio), Ok(Exact::new(160, 147)));
/// ```
pub fn target_from_rates(source: Ratio<u64>, sink: Ratio<u64>) -> Result<Exact, TargetError> {
    for (field, rate) in [("source", source), ("sink", sink)] {
        if *rate.numer() == 0 {
            return Err(TargetError::ZeroRate { field });
        }
    }
    let n = u128::from(*sink.numer()) * u128::from(*source.denom());
    let d = u128::from(*sink.denom()) * u128::from(*source.numer());
    let g = n.gcd(&d);
    Ok(Exact::new_raw(n / g, d / g))
}

/// A fraction with 64-bit parts as an exact target.
pub fn exact(fraction: &Fraction) -> Exact {
    Exact::new_raw(u128::from(*fraction.numer()), u128::from(*fraction.denom()))
}

/// The residual of a ratio: `(L/M)/target − 1`, signed, dimensionless.
///
/// The sign is exact and the value is 0.0 only if the two are equal; otherwise it is within two units in
/// the last place, however small it is, because the difference is formed in integers.
///
/// # Examples
/// Positive means that the ratio makes more output than the target asks for:
/// ```
/// use ratewright_ratio::{Exact, Fraction, residual};
/// let target = Exact::new(1_000, 1_000);
/// assert!(residual(&Fraction::new(1_001, 1_000), &target) > 0.0);
/// assert_eq!(residual(&Fraction::new(999, 1_000), &target), -0.001);
/// assert_eq!(residual(&Fraction::new(7, 7), &target), 0.0);
/// ```
pub fn residual(ratio: &Fraction, target: &Exact) -> f64 {
    let made = Wide::product(*target.denom(), *ratio.numer());
    let wanted = Wide::product(*target.numer(), *ratio.denom());
    if made >= wanted {
        made.minus(wanted).to_f64() / wanted.to_f64()
    } else {
        -(wanted.minus(made).to_f64() / wanted.to_f64())
    }
}

/// Compares a target with a fraction, exactly.
#[inline]
pub(crate) fn compare(target: &Exact, l: u64, m: u64) -> std::cmp::Ordering {
    wide::compare(*target.numer(), *target.denom(), l, m)
}
