//! Signs, derived once.
//!
//! A resampler at the ratio r = L/M turns source samples, which come at the true rate s, into
//! r·s output samples a second; the sink takes k of them. With drifts y (true rate = f·(1 + y),
//! positive runs fast):
//!
//! - the **target** is k/s, the ratio at which nothing gains;
//! - the **residual** of a ratio is r/target − 1: positive makes too much;
//! - the **phase error** grows at φ̇ = r·s − k = k·residual, sink samples a second.
//!
//! So a source that runs fast, or a ratio that is too large, fills the buffer: φ > 0.
//!
//! A FIFO **after** the resampler holds centre + φ, in sink samples. A FIFO **before** it, under a
//! sink that pulls, is consumed at k/r and filled at s: it gains s − k/r = φ̇/r a second, so it
//! holds centre + φ·M/L, in source samples.
//!
//! ```
//! use ratewright_control::signs::{phase_velocity, residual, target, true_rate};
//!
//! // A source 10 ppm fast into an exact sink: fewer outputs per input are needed.
//! let (source, sink) = (true_rate(44_100.0, 10e-6), true_rate(48_000.0, 0.0));
//! let wanted = target(source, sink);
//! assert!(wanted < 160.0 / 147.0);
//!
//! // The nominal ratio then makes too much, and the buffer after it fills.
//! let ratio = 160.0 / 147.0;
//! assert!(residual(ratio, wanted) > 0.0);
//! let velocity = phase_velocity(ratio, source, sink);
//! assert!((velocity - 48_000.0 * 10e-6).abs() < 1e-5);
//! assert!((velocity - sink * residual(ratio, wanted)).abs() < 1e-9);
//!
//! // Counted sample by sample over 10,000 s: outputs made, outputs taken, inputs consumed.
//! let seconds = 10_000.0;
//! let (came, taken) = (source * seconds, sink * seconds);
//! let fifo_after = came * ratio - taken;
//! let fifo_before = came - taken / ratio;
//! assert!((fifo_after - velocity * seconds).abs() < 1e-3);
//! assert!((fifo_before - fifo_after * 147.0 / 160.0).abs() < 1e-3);
//! ```

/// True rate, Hz, of a clock with the nominal rate `nominal_hz` and the drift `drift`.
pub fn true_rate(nominal_hz: f64, drift: f64) -> f64 {
    nominal_hz * (1.0 + drift)
}

/// Target ratio of two true rates, Hz: output samples for one input sample.
pub fn target(source_hz: f64, sink_hz: f64) -> f64 {
    sink_hz / source_hz
}

/// Residual of a ratio, dimensionless: positive makes more output than the target asks for.
pub fn residual(ratio: f64, target: f64) -> f64 {
    ratio / target - 1.0
}

/// Growth of the phase error, sink samples a second, at a ratio between two true rates, Hz.
pub fn phase_velocity(ratio: f64, source_hz: f64, sink_hz: f64) -> f64 {
    ratio * source_hz - sink_hz
}
