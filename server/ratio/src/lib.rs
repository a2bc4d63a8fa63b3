//! Exact ratios for resamplers: best approximation under every bound, certificates, cadences.
//!
//! Pure arithmetic: no clock, no file, no allocation in the hot paths, and no rounding except where a
//! result is an `f64` by name (residuals, seconds).

mod bounds;
mod bracket;
mod cadence;
mod certificate;
mod exact;
mod interval;
mod ladder;
mod nearest;
pub mod plan;
mod rate;
mod region;
mod simplest;
mod smooth;
mod wide;

pub use bounds::{Bounds, BoundsError, MAX_BOUND, MAX_SMOOTH_BOUND};
pub use bracket::{Bracket, Node};
pub use cadence::{Cadence, CadenceError, CadenceState};
pub use certificate::{Certificate, CertificateError, Claim, Reason, Side, SteppingPair};
pub use exact::{
    Exact, Fraction, TargetError, exact, residual, target_from_f64, target_from_rates,
};
pub use interval::{Ends, Interval, IntervalError};
pub use ladder::{Rung, ladder};
pub use nearest::{Best, best, best_in, neighbours};
pub use rate::{RateError, parse_rate, parse_target};
pub use region::{Region, RegionError};
pub use simplest::{Parents, Simplest, simplest};
