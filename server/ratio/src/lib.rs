//! Exact ratios for resamplers: best approximation under every bound, certificates, cadences.
//!
//! Pure arithmetic: no clock, no file, no allocation in the hot paths, and no rounding except where a
//! result is an `f64` by name (residuals, seconds).

mod accumulator;
mod balance;
pub mod big;
mod bounds;
mod bracket;
mod cadence;
mod certificate;
mod exact;
mod frames;
mod front;
mod interval;
pub mod kaiser;
mod ladder;
mod lazy;
mod many;
mod multiple;
mod narrow;
mod nearest;
mod outward;
pub mod plan;
mod rate;
mod region;
mod simplest;
mod smooth;
mod smooth_table;
pub mod stages;
mod stepping;
mod wide;

pub use accumulator::{best_for_m, best_power_of_two, is_nearest_for_m};
pub use bounds::{Bounds, BoundsError, MAX_BOUND, MAX_SMOOTH_BOUND};
pub use bracket::{Bracket, Node};
pub use cadence::{Cadence, CadenceError, CadenceState};
pub use certificate::{Certificate, CertificateError, Claim, Reason, Side, SteppingPair};
pub use exact::{
    Exact, Fraction, TargetError, exact, residual, target_from_f64, target_from_rates,
};
pub use frames::{FrameCadence, FrameError, FrameOrder};
pub use front::{Front, FrontPoint, filter_coefficients, front};
pub use interval::{Ends, Interval, IntervalError};
pub use ladder::{Rung, ladder};
pub use lazy::{Lazy, LazyError};
pub use many::{BatchError, best_of_many};
pub use multiple::{Multiple, MultipleBest, MultipleError, best_multiple};
pub use nearest::{Best, around, best, best_above, best_below, best_in, neighbours};
pub use outward::{Outward, outward};
pub use rate::{RateError, parse_rate, parse_target};
pub use region::{Region, RegionError};
pub use simplest::{Parents, Simplest, simplest};
pub use smooth_table::SmoothTable;
pub use stepping::{Stepping, SteppingError, SteppingState};
