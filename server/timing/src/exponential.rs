//! The exponential function, the same bits everywhere, without a division or a branch.

const MOST: f64 = 708.0;
/// Added and taken away again, it rounds to a whole number.
const ROUNDING: f64 = 6_755_399_441_055_744.0;
const LN_2_HIGH: f64 = 0.693_147_180_369_123_8;
const LN_2_LOW: f64 = 1.908_214_929_270_587_7e-10;

/// exp(x) to 1e-14 relative, x kept within ±708.
///
/// x = k·ln 2 + r with k whole and |r| ≤ ln 2 / 2; Taylor's series of exp(r) to the eleventh
/// power, whose terms are summed in pairs.
#[inline]
pub(crate) fn exp(x: f64) -> f64 {
    let x = x.clamp(-MOST, MOST);
    let k = (x * core::f64::consts::LOG2_E + ROUNDING) - ROUNDING;
    let r = (x - k * LN_2_HIGH) - k * LN_2_LOW;
    let r2 = r * r;
    let r4 = r2 * r2;
    let low = (1.0 + r) + r2 * (1.0 / 2.0 + r * (1.0 / 6.0));
    let middle = (1.0 / 24.0 + r * (1.0 / 120.0)) + r2 * (1.0 / 720.0 + r * (1.0 / 5040.0));
    let high = (1.0 / 40_320.0 + r * (1.0 / 362_880.0))
        + r2 * (1.0 / 3_628_800.0 + r * (1.0 / 39_916_800.0));
    let power = f64::from_bits(((1023 + k as i64) as u64) << 52);
    power * (low + r4 * (middle + r4 * high))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn agrees_with_the_library() {
        for i in -70_000..70_000 {
            let x = f64::from(i) * 0.010_1;
            let truth = libm::exp(x);
            assert!((exp(x) - truth).abs() <= 1e-14 * truth, "{x}");
        }
        assert_eq!(exp(0.0), 1.0);
        assert!(exp(-1e300) < 1e-307 && exp(1e300).is_finite());
        assert!(exp(f64::NAN).is_nan());
    }
}
