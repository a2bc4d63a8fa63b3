//! Clock estimation: measurements in, drift with its interval out.
//!
//! A [`Link`] is the estimator of one clock read against one reference by one probe. Feed it
//! [`Measurement`]s in the order of reference time with [`Link::observe`]; ask
//! [`Link::estimate`] for the [`Estimate`] at any time from the last reading on. [`compose`]
//! chains a device against a host with the host against the house, [`combine`] joins several
//! probes of one clock. [`stability`] has the statistics of the trade, [`sim`] a world of
//! seeded clocks and paths to test against.
//!
//! # Conventions
//! - Drift y: true rate = nominal·(1 + y) in time of the reference; positive runs fast.
//!   The offset of RFC 5905 has the opposite sign: dθ/dt = −y.
//! - Phase: clock minus reference, so dx/dt = y.
//! - SI at the surface (dimensionless, s, ns); µs, ppm and s inside, where µs/s = ppm.
//! - No clock is read, nothing is random, and all transcendental functions are those of one
//!   pure-Rust library: same calls, same bits, on any machine. State is saved with serde and
//!   goes on identically.
//!
//! # How it works
//! Readings are checked and unwrapped exactly (`intake`); the first sixteen give a line and a
//! first guess of the noise (`start`). Then a bank of eight modes runs side by side, each a
//! hypothesis of how the clock wanders (`bank`, `mode`), weighed by how well it foretells the
//! readings and never mixed. Every mode is corrected by the exact posterior mean and variance
//! under a density of the measurement error that has tails (`noise`) and is learned from the
//! errors (`learner`), so that outliers fade by themselves. Two-way links take the least
//! delayed of blocks of four (`blocks`) and follow bursts of queueing (`direction`). Steps,
//! resets, route changes and jumps of the drift are found and followed (`direction`,
//! `filter`). In a gap the interval grows by the measured structure function of the clock's
//! own extrapolation errors (`holdover`, `growth`).
//!
//! # Figures
//! `cargo run --release -p ratewright-timing --example monte_carlo` prints this, 200 seeds a
//! row; "wanted" are the figures of a comparison that the design came out of, on other
//! simulated worlds of the same kinds, so that the bound is another one. Coverage of the
//! claimed 95 % interval with its standard error over seeds.
//!
//! | scenario | RMSE ppm (wanted) | × bound (wanted) | coverage | at start | s to 10 / 1 / 0.1 ppm, 95th percentile |
//! | --- | --- | --- | --- | --- | --- |
//! | gauss | 0.0021 (0.0025) | 1.04 (1.06) | 0.971 ± 0.003 | 0.967 ± 0.004 | 3 / 16 / 140 |
//! | tails | 0.0031 (0.0039) | 1.07 (1.04) | 0.955 ± 0.004 | 0.976 ± 0.002 | 15 / 37 / 279 |
//! | fast | 0.0041 (0.0080) | 1.40 (1.65) | 1.000 ± 0.000 | 0.988 ± 0.002 | 2 / 7 / 57 |
//! | events | 0.0028 (0.0035) | 1.11 (1.06) | 0.975 ± 0.002 | 0.985 ± 0.002 | 8 / 31 / 180 |
//! | gamma | 0.0035 (0.0043) | 1.16 (1.32) | 0.968 ± 0.003 | 0.981 ± 0.002 | 16 / 67 / 359 |
//! | asymmetric | 0.0031 (0.0034) | 1.10 (1.08) | 0.960 ± 0.003 | 0.982 ± 0.002 | 17 / 55 / 269 |
//! | congested | 0.0120 (0.0091) | 5.42 (3.21) | 0.956 ± 0.003 | 0.974 ± 0.002 | 15 / 43 / 159 |
//! | reports | 0.0097 (0.0104) | 1.27 (1.15) | 0.989 ± 0.001 | 0.987 ± 0.002 | 127 / 497 / 1695 |
//! | frequency | 0.0046 (0.0136) | 1.04 (1.04) | 0.961 ± 0.002 | 0.982 ± 0.002 | 1 / 1 / 41 |
//! | thermal | 0.0131 (0.0096) | 4.10 (2.45) | 0.960 ± 0.002 | 0.958 ± 0.003 | 22 / 53 / 729 |
//! | gaps | 0.0153 (0.0126) | 4.27 (2.91) | 0.954 ± 0.002 | 0.940 ± 0.003 | 83 / 100 / 394 |
//! | everything | 0.0136 (0.0118) | 5.49 (2.98) | 0.962 ± 0.002 | 0.960 ± 0.002 | 18 / 54 / 619 |
//!
//! RMSE over the estimator's, of two points 300 s apart, least squares over 300 s, and
//! exponentially weighted least squares, in the same run:
//! gauss 45.4, 2.1, 1.0; tails 1062.8, 145.8, 21.0; fast 754.1, 20.9, 20.9; events
//! 1139.4, 112.6, 5459.1; gamma 121.6, 17.7, 2.6; asymmetric 250.4, 36.7, 5.5; congested
//! 190.2, 50.8, 14.7; reports 571.0, 178.5, 26.2; thermal 233.0, 46.8, 7.2; gaps 201.4,
//! 69.1, 10.4; everything 113.7, 30.1, 331.0.
//!
//! Where coverage is above .97 the intervals are wider than these worlds need: with minutes of
//! readings (fast), or readings every five seconds with a millisecond of jitter (reports), the
//! bank cannot yet exclude modes more restless than the simulated clocks, and a real clock may
//! be such. The same holds after gaps of an hour and a day, whose prior is that of a plain
//! crystal in a room that is not held at its temperature. Coverage is nowhere below .93.
//! Congested paths are the weak spot: where both directions are congested at once the error can
//! be many times the bound for some minutes, and the interval says so.

mod acquire;
mod bank;
mod blocks;
mod combine;
mod config;
mod diagnosis;
mod direction;
mod drift_filter;
mod erfcx_table;
mod estimate;
mod exponential;
mod filter;
mod forecast;
mod growth;
mod history;
mod holdover;
mod intake;
mod learner;
mod link;
mod lock;
mod measurement;
mod mode;
mod noise;
mod normal;
mod oscillator;
mod outcome;
mod predict;
pub mod sim;
pub mod stability;
mod start;

pub use combine::combine;
pub use config::{ConfigError, LatencyTail, LinkConfig};
pub use diagnosis::{Diagnosis, DirectionDiagnosis, DriftDiagnosis, Wander};
pub use estimate::{Estimate, Reason, State, compose, exact};
pub use forecast::Forecast;
pub use history::{EventCounts, History, Transition};
pub use link::{Link, hot_state_bytes};
pub use measurement::Measurement;
pub use oscillator::Oscillator;
pub use outcome::{Event, Outcome, Refusal};
