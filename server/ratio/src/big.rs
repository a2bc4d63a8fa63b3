//! Targets beyond 128 bits, by big integers.
//!
//! The answers are small all the same, so only the search differs; it is the same search over another
//! number type, and the oracle that the faster paths are tested against. Every finite positive double fits.
//! Cost: a big-integer division a partial quotient.

use num_bigint::BigUint;
use num_rational::Ratio;
use num_traits::{One, ToPrimitive, Zero};

use crate::bracket::{Bracket, Ends, Magnitude, descend};
use crate::exact::dyadic;
use crate::{Best, Certificate, Region, TargetError};

/// An exact target of any size, positive.
pub type BigTarget = Ratio<BigUint>;

impl Magnitude for BigUint {
    fn quotient(&self, divisor: &Self) -> u64 {
        if divisor.is_zero() {
            u64::MAX
        } else {
            (self / divisor).to_u64().unwrap_or(u64::MAX)
        }
    }

    fn minus_times(&self, j: u64, other: &Self) -> Self {
        self - other * j
    }
}

/// The double `x` as the exact dyadic fraction that it is, in lowest terms, whatever its exponent.
///
/// # Errors
/// [`TargetError::NotPositive`] for NaN, infinities and everything not above zero.
///
/// # Examples
/// ```
/// use ratewright_ratio::big;
/// // The smallest double is 2^-1074.
/// let least = big::target_from_f64(5e-324)?;
/// assert_eq!(least.denom().bits(), 1_075);
/// # Ok::<(), ratewright_ratio::TargetError>(())
/// ```
pub fn target_from_f64(x: f64) -> Result<BigTarget, TargetError> {
    if !(x.is_finite() && x > 0.0) {
        return Err(TargetError::NotPositive { value: x });
    }
    let (odd, exponent) = dyadic(x);
    let power = BigUint::one() << exponent.unsigned_abs();
    let odd = BigUint::from(odd);
    Ok(if exponent >= 0 {
        Ratio::new_raw(odd * power, BigUint::one())
    } else {
        Ratio::new_raw(odd, power)
    })
}

/// The nearest ratio to `target` in a region; on a tie the smaller M, then the smaller L.
pub fn best_in(target: &BigTarget, region: &Region) -> Best {
    let ends = search(target, region);
    let (near, far) = (&ends.convergent, &ends.semiconvergent);
    let certificate = Certificate::Nearest(ends.bracket());
    let (Some(first), Some(second)) = (near.0.fraction(), far.0.fraction()) else {
        let ratio = near.0.fraction().or(far.0.fraction());
        return Best {
            ratio: ratio.expect("every region holds 1/1, so one end is a ratio"),
            certificate,
        };
    };
    let order = (&near.1 * far.0.m).cmp(&(&far.1 * near.0.m));
    let ratio = match order {
        std::cmp::Ordering::Less => first,
        std::cmp::Ordering::Greater => second,
        std::cmp::Ordering::Equal if (near.0.m, near.0.l) < (far.0.m, far.0.l) => first,
        std::cmp::Ordering::Equal => second,
    };
    Best { ratio, certificate }
}

/// The neighbours of `target` in a region, as [`crate::neighbours`].
pub fn neighbours_in(target: &BigTarget, region: &Region) -> Bracket {
    search(target, region).bracket()
}

fn search(target: &BigTarget, region: &Region) -> Ends<BigUint> {
    descend(
        target.numer().clone(),
        target.denom().clone(),
        region,
        |_| (),
    )
}
