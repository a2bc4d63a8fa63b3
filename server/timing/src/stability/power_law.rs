//! Naming the noise by the slope of the modified Allan deviation.

/// Power law of a clock's noise. With S_y(f) ∝ f^α, the modified Allan deviation goes as τ^μ
/// (NIST SP 1065, table 2: μ = −3/2, −1, −1/2, 0, +1/2 for α = 2, 1, 0, −1, −2).
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum PowerLaw {
    /// White phase noise, α = 2.
    WhitePhase,
    /// Flicker phase noise, α = 1.
    FlickerPhase,
    /// White frequency noise, α = 0.
    WhiteFrequency,
    /// Flicker frequency noise, α = −1.
    FlickerFrequency,
    /// Random walk of the frequency, α = −2.
    RandomWalkFrequency,
}

/// The power law whose slope is nearest to that between two modified Allan deviations at two
/// intervals, with the slope. None when the values allow no slope.
///
/// ```
/// use ratewright_timing::stability::{PowerLaw, identify};
/// let (law, slope) = identify((1.0, 1e-9), (4.0, 0.5e-9)).unwrap();
/// assert_eq!(law, PowerLaw::WhiteFrequency);
/// assert!((slope + 0.5).abs() < 1e-12);
/// ```
pub fn identify(short: (f64, f64), long: (f64, f64)) -> Option<(PowerLaw, f64)> {
    let run = libm::log(long.0 / short.0);
    let slope = libm::log(long.1 / short.1) / run;
    if run <= 0.0 || !slope.is_finite() {
        return None;
    }
    let law = match slope {
        s if s < -1.25 => PowerLaw::WhitePhase,
        s if s < -0.75 => PowerLaw::FlickerPhase,
        s if s < -0.25 => PowerLaw::WhiteFrequency,
        s if s < 0.25 => PowerLaw::FlickerFrequency,
        _ => PowerLaw::RandomWalkFrequency,
    };
    Some((law, slope))
}
