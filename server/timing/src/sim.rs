//! Seeded clocks and paths: a world to test against, with its truth known.
//!
//! Same seed, same bits, on any machine. A [`Clock`] has a true phase at every true time; a
//! [`Path`] delays and loses; the functions of [`probe`] make the measurements that a probe
//! would report of them. Times are ns of the true timescale, which is the reference.
//!
//! ```
//! use num_rational::Ratio;
//! use ratewright_timing::sim::{Clock, ClockModel, Delay, Path, PathModel, probe};
//! use ratewright_timing::{Link, LinkConfig};
//! let nominal_hz = Ratio::from_integer(48_000);
//! let mut clock = Clock::new(ClockModel { drift: 12e-6, ..ClockModel::crystal() }, 7);
//! let mut path = Path::new(PathModel::new(Delay::Normal { deviation_s: 100e-6 }), 8);
//! let mut link = Link::new(LinkConfig::new(nominal_hz))?;
//! for i in 0..600 {
//!     if let Some(reading) = probe::counter(&mut clock, &mut path, nominal_hz, 32, i * 100_000_000) {
//!         link.observe(i as u64, &reading)?;
//!     }
//! }
//! let estimate = link.estimate(60_000_000_000);
//! let truth = clock.drift(60_000_000_000);
//! assert!((estimate.drift - truth).abs() < 1e-6);
//! # Ok::<(), Box<dyn std::error::Error>>(())
//! ```

mod clock;
mod delay;
mod flicker;
mod path;
pub mod probe;
mod random;

pub use clock::{Clock, ClockModel, Daily, Disturbance, Upset, WarmUp, Weather};
pub use delay::Delay;
pub use path::{Path, PathModel, Period};
pub use random::Random;
