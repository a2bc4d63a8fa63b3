//! What is approximated: seeded doubles as exact dyadic fractions.

use ratewright_ratio::{Exact, Interval, target_from_f64};

const COUNT: u64 = 4_096;

/// SplitMix64 as a number from 0 to 1.
fn unit(seed: u64) -> f64 {
    let z = seed.wrapping_mul(0x9e37_79b9_7f4a_7c15);
    let z = (z ^ (z >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
    let z = (z ^ (z >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
    ((z ^ (z >> 31)) >> 11) as f64 / (1u64 << 53) as f64
}

fn doubles(of: impl Fn(f64) -> f64) -> Vec<f64> {
    (1..=COUNT).map(|seed| of(unit(seed))).collect()
}

/// The same numbers as exact dyadic fractions.
pub(crate) fn exact(values: &[f64]) -> Vec<Exact> {
    values
        .iter()
        .map(|&x| target_from_f64(x).expect("positive, near 1"))
        .collect()
}

/// Any ratio from 1/4 to 4.
pub(crate) fn uniform() -> Vec<Exact> {
    exact(&doubles(|u| 0.25 + 3.75 * u))
}

/// The families of the benchmark.
pub(crate) fn value_families() -> [(&'static str, Vec<f64>); 3] {
    [
        ("f64 from 1/4 to 4", doubles(|u| 0.25 + 3.75 * u)),
        (
            "160/147 within 100 ppm",
            doubles(|u| 160.0 / 147.0 * (1.0 + (u - 0.5) * 2e-4)),
        ),
        ("1/1 within 100 ppm", doubles(|u| 1.0 + (u - 0.5) * 2e-4)),
    ]
}

/// The same as exact targets.
pub(crate) fn families() -> [(&'static str, Vec<Exact>); 3] {
    value_families().map(|(name, values)| (name, exact(&values)))
}

/// The interval of a target ± one part in `relative`, in parts of 64 bits.
pub(crate) fn around(target: &Exact, relative: u128) -> Interval {
    let scale = 1u128 << 52;
    let middle = target.numer() * scale / target.denom();
    let width = middle / relative;
    let end = |numerator| Exact::new(numerator, scale);
    Interval::closed(end(middle - width), end(middle + width)).expect("not empty")
}
