//! How long a filter must be: the Kaiser window's estimate.
//!
//! Source: J. F. Kaiser, "Nonrecursive digital filter design using the I0-sinh window function" (1974):
//! for a ripple of A dB and a transition Δω = π·w, w a part of the Nyquist frequency,
//! N = (A − 7.95)/(2.285·Δω) + 1 taps, and
//! β = 0.1102(A − 8.7) for A > 50; 0.5842(A − 21)^0.4 + 0.07886(A − 21) for 21 ≤ A ≤ 50; 0 below.
//!
//! **Cost.** A few operations; the power by libm, with the same bits anywhere.
//!
//! **Corner cases.** Below 21 dB β is 0, a rectangular window, whose ripple no length lessens;
//! [`crate::stages`] accepts from there on. The estimate holds to a few tenths of a decibel; it is no proof that a filter meets its stopband.

use std::f64::consts::PI;

/// The estimate before rounding up. `ripple_db` above 7.95; `width` a part of Nyquist, above 0 to 1.
pub fn taps_estimate(ripple_db: f64, width: f64) -> f64 {
    (ripple_db - 7.95) / 2.285 / (PI * width) + 1.0
}

/// Taps for a ripple of `ripple_db` and a transition of `width` times the Nyquist frequency.
///
/// # Examples
/// ```
/// use ratewright_ratio::kaiser;
/// assert_eq!(kaiser::taps(120.0, 0.1), 158);
/// ```
pub fn taps(ripple_db: f64, width: f64) -> u64 {
    // `as` saturates: a width of nearly zero asks for more taps than anyone has.
    taps_estimate(ripple_db, width).ceil().max(1.0) as u64
}

/// The window's shape parameter β, dimensionless, for a ripple of `ripple_db`.
pub fn beta(ripple_db: f64) -> f64 {
    if ripple_db > 50.0 {
        0.1102 * (ripple_db - 8.7)
    } else if ripple_db > 21.0 {
        0.5842 * libm::pow(ripple_db - 21.0, 0.4) + 0.07886 * (ripple_db - 21.0)
    } else {
        0.0
    }
}

/// The ripple in dB that `taps` taps reach with a transition of `width` times the Nyquist frequency.
pub fn attenuation_db(taps: u64, width: f64) -> f64 {
    2.285 * (taps - 1) as f64 * PI * width + 7.95
}

/// The length of a single polyphase prototype for L/M, made odd so that its delay is whole: stopband from
/// 1/max(L, M) of the Nyquist frequency at L times the source rate, passband up to (1 − `relative_width`) of it.
pub fn prototype_taps(l: u64, m: u64, ripple_db: f64, relative_width: f64) -> u64 {
    taps(ripple_db, relative_width / l.max(m) as f64) | 1
}
