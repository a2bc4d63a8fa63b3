//! Products beyond 128 bits.
//!
//! Every comparison of a candidate L/M (64-bit parts) with a target n/D (128-bit parts) is a comparison
//! of products of at most four 64-bit words, so nothing in this crate overflows and nothing is rounded.

use std::cmp::Ordering;

/// An unsigned number below 2^256, most significant part first so that the derived order is numeric.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub(crate) struct Wide {
    high: u128,
    low: u128,
}

impl Wide {
    /// The exact product `a·b`.
    #[inline]
    pub(crate) fn product(a: u128, b: u64) -> Self {
        let low = u128::from(a as u64) * u128::from(b);
        let middle = (a >> 64) * u128::from(b) + (low >> 64);
        Self {
            high: middle >> 64,
            low: (middle << 64) | u128::from(low as u64),
        }
    }

    /// The exact difference `self − other`; `other` must not be larger.
    #[inline]
    pub(crate) fn minus(self, other: Self) -> Self {
        let (low, borrow) = self.low.overflowing_sub(other.low);
        Self {
            high: self.high - other.high - u128::from(borrow),
            low,
        }
    }

    /// The exact product with `factor`, for a number below 2^192.
    #[inline]
    pub(crate) fn times(self, factor: u64) -> Self {
        let low = Self::product(self.low, factor);
        Self {
            high: low.high + self.high * u128::from(factor),
            low: low.low,
        }
    }

    /// The value as a u128 if it is below 2^128.
    #[inline]
    pub(crate) fn narrow(self) -> Option<u128> {
        (self.high == 0).then_some(self.low)
    }

    /// The nearest double, within one unit in the last place.
    pub(crate) fn to_f64(self) -> f64 {
        if self.high == 0 {
            return self.low as f64;
        }
        // The top 128 bits, truncated, hold the value to 2^-127, and the conversion rounds to nearest.
        let shift = 128 - self.high.leading_zeros();
        let top = if shift == 128 {
            self.high
        } else {
            (self.high << (128 - shift)) | (self.low >> shift)
        };
        let scale = f64::from_bits((1023 + u64::from(shift)) << 52);
        top as f64 * scale
    }
}

/// Compares `a/b` with `c/d` by cross products, `a` and `b` of 128 bits; `b` and `d` may be zero for 1/0.
#[inline]
pub(crate) fn compare(a: u128, b: u128, c: u64, d: u64) -> Ordering {
    match (u64::try_from(a), u64::try_from(b)) {
        (Ok(a), Ok(b)) => (u128::from(a) * u128::from(d)).cmp(&(u128::from(c) * u128::from(b))),
        _ => Wide::product(a, d).cmp(&Wide::product(b, c)),
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use num_bigint::BigUint;

    fn big(w: Wide) -> BigUint {
        (BigUint::from(w.high) << 128) + w.low
    }

    #[test]
    fn arithmetic_agrees_with_big_integers() {
        let a_values = [
            0,
            1,
            u128::from(u64::MAX),
            1 << 64,
            u128::MAX,
            u128::MAX - 7,
            1 << 127,
        ];
        let b_values = [0, 1, 3, u64::MAX, u64::MAX - 1, 1 << 63];
        for (a, b) in a_values.into_iter().flat_map(|a| b_values.map(|b| (a, b))) {
            let product = Wide::product(a, b);
            assert_eq!(big(product), BigUint::from(a) * b);
            assert_eq!(
                big(product.times(u64::MAX)),
                BigUint::from(a) * b * u64::MAX
            );
            let smaller = Wide::product(a / 3, b);
            assert_eq!(
                big(product.minus(smaller)),
                BigUint::from(a) * b - BigUint::from(a / 3) * b
            );
        }
    }

    #[test]
    fn double_is_within_one_unit_in_the_last_place() {
        let w = Wide::product(u128::MAX, u64::MAX);
        let relative = w.to_f64() / (u128::MAX as f64 * u64::MAX as f64) - 1.0;
        assert!(relative.abs() <= f64::EPSILON, "{relative:e}");
        let power = Wide::product(1 << 127, 1 << 63);
        assert_eq!(power.to_f64(), 2f64.powi(190));
        assert_eq!(power.times(1 << 63).to_f64(), 2f64.powi(253));
        assert_eq!(Wide::product(5, 7).to_f64(), 35.0);
    }
}
