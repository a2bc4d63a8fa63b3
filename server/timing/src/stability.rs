//! Stability statistics of a clock's phase: how far it strays over which interval.
//!
//! [`deviation`], [`mtie`] and [`tie_rms`] are the exact estimators over a whole record of
//! phase samples; [`Stability`] keeps the same statistics of an endless stream at octave
//! intervals, in bounded memory. [`identify`] names the power law of the noise by the slope of
//! the modified deviation, and [`Mask`] compares with published limits.
//!
//! Phase is clock minus reference, s, equally spaced by τ₀.

mod deviations;
mod interval_error;
mod masks;
mod power_law;
mod stream;

pub use deviations::{Deviation, Kind, deviation};
pub use interval_error::{mtie, tie_rms};
pub use masks::{MASKS, Mask, Segment};
pub use power_law::{PowerLaw, identify};
pub use stream::{OctaveFigures, Stability};
