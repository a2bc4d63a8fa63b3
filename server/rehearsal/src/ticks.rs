//! From the time a clock shows to the ticks it has counted.

use num_rational::Ratio;

const NS_PER_S: f64 = 1e9;

/// Fractions of a nanosecond are kept to 2^-20 ns, so that a tick is never lost to rounding.
const FRACTIONS: i128 = 1 << 20;

/// What a counter shows, counted from the origin, once `elapsed_ns` of house time have passed and the
/// clock has gained `phase_s` on it.
pub(crate) fn ticks(nominal_hz: Ratio<u64>, elapsed_ns: i64, phase_s: f64) -> i128 {
    let gained = libm::round(phase_s * (NS_PER_S * FRACTIONS as f64)) as i128;
    let local = i128::from(elapsed_ns) * FRACTIONS + gained;
    let per_tick = i128::from(*nominal_hz.denom()) * NS_PER_S as i128 * FRACTIONS;
    (local * i128::from(*nominal_hz.numer())).div_euclid(per_tick)
}

/// Ticks that pass in `elapsed_ns` of house time while the clock gains `gained_s` on it.
pub(crate) fn ticks_within(nominal_hz: Ratio<u64>, elapsed_ns: i64, gained_s: f64) -> f64 {
    let hz = *nominal_hz.numer() as f64 / *nominal_hz.denom() as f64;
    hz * (elapsed_ns as f64 / NS_PER_S + gained_s)
}

#[cfg(test)]
mod tests {
    use super::*;

    const S: i64 = 1_000_000_000;

    #[test]
    fn a_second_of_48k_is_48000_ticks() {
        assert_eq!(ticks(Ratio::from_integer(48_000), S, 0.0), 48_000);
        assert_eq!(ticks(Ratio::from_integer(48_000), S - 1, 0.0), 47_999);
    }

    /// One part per million fast for a day of 29.97: 86,400·30000/1001·(1 + 1e-6) frames.
    #[test]
    fn gained_time_gains_ticks() {
        let whole = ticks(Ratio::new(30_000, 1001), 86_400 * S, 86_400.0 * 1e-6);
        let exact: f64 = 86_400.0 * 30_000.0 / 1001.0 * (1.0 + 1e-6);
        assert_eq!(whole, exact.floor() as i128);
    }

    #[test]
    fn three_years_of_a_terahertz_do_not_overflow() {
        let whole = ticks(Ratio::from_integer(1_000_000_000_000), 94_608_000 * S, 1e6);
        assert_eq!(
            whole,
            94_608_000_i128 * 1_000_000_000_000 + 1_000_000_000_000_000_000
        );
    }
}
