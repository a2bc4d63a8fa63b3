//! The normal distribution: density, tails and their ratio, the same bits everywhere.

use crate::erfcx_table::ERFCX_EIGHTHS;

/// Two-sided 95 % quantile of the normal distribution.
pub(crate) const Z95: f64 = 1.959_963_984_540_054;
const SQRT_2: f64 = core::f64::consts::SQRT_2;
const TWO_OVER_SQRT_PI: f64 = core::f64::consts::FRAC_2_SQRT_PI;

/// erfcx(x) = exp(x²)·erfc(x) for x ≥ 0, to 1e-10 relative.
///
/// Taylor's series about the nearest multiple of 1/8: with y = erfcx, y′ = 2xy − 2/√π and
/// y⁽ⁿ⁺¹⁾ = 2xy⁽ⁿ⁾ + 2ny⁽ⁿ⁻¹⁾. Beyond 12 the asymptotic series.
#[inline]
pub(crate) fn erfcx(x: f64) -> f64 {
    debug_assert!(x >= 0.0);
    if x >= 12.0 {
        let r = 1.0 / (2.0 * x * x);
        let series = 1.0 - r * (1.0 - 3.0 * r * (1.0 - 5.0 * r * (1.0 - 7.0 * r)));
        return series * TWO_OVER_SQRT_PI / (2.0 * x);
    }
    let node = (x * 8.0 + 0.5) as usize;
    let at = node as f64 * 0.125;
    let d = x - at;
    let y0 = ERFCX_EIGHTHS[node];
    let y1 = 2.0 * at * y0 - TWO_OVER_SQRT_PI;
    let y2 = 2.0 * (at * y1 + y0);
    let y3 = 2.0 * (at * y2 + 2.0 * y1);
    let y4 = 2.0 * (at * y3 + 3.0 * y2);
    let y5 = 2.0 * (at * y4 + 4.0 * y3);
    let y6 = 2.0 * (at * y5 + 5.0 * y4);
    let tail = d * (1.0 / 24.0) * (y4 + d * 0.2 * (y5 + d * (1.0 / 6.0) * y6));
    y0 + d * (y1 + d * (0.5 * y2 + d * ((1.0 / 6.0) * y3 + tail)))
}

/// Φ(u), the normal distribution function.
pub(crate) fn cdf(u: f64) -> f64 {
    0.5 * libm::erfc(-u / SQRT_2)
}

/// Quantile of Student's t distribution at 97.5 %, by its Cornish–Fisher expansion in 1/ν
/// beyond three degrees of freedom (Abramowitz & Stegun 26.7.5).
pub(crate) fn t975(degrees: f64) -> f64 {
    if degrees < 1.5 {
        return 12.706;
    }
    if degrees < 2.5 {
        return 4.303;
    }
    if degrees < 3.5 {
        return 3.182;
    }
    let z = Z95;
    let (z3, z5, z7) = (z * z * z, z * z * z * z * z, z * z * z * z * z * z * z);
    let g1 = (z3 + z) / 4.0;
    let g2 = (5.0 * z5 + 16.0 * z3 + 3.0 * z) / 96.0;
    let g3 = (3.0 * z7 + 19.0 * z5 + 17.0 * z3 - 15.0 * z) / 384.0;
    z + g1 / degrees + g2 / (degrees * degrees) + g3 / (degrees * degrees * degrees)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn erfcx_agrees_with_its_definition() {
        for i in 0..1200 {
            let x = i as f64 * 0.0137;
            let truth = if x < 25.0 {
                libm::exp(x * x) * libm::erfc(x)
            } else {
                continue;
            };
            let got = erfcx(x);
            assert!(
                (got - truth).abs() < 2e-9 * truth,
                "x {x}: {got} against {truth}"
            );
        }
    }

    #[test]
    fn t_quantiles_agree_with_the_common_table() {
        for (degrees, value) in [(1, 12.706), (2, 4.303), (3, 3.182), (5, 2.571), (14, 2.145)] {
            assert!((t975(degrees as f64) - value).abs() < 0.02, "{degrees}");
        }
    }
}
