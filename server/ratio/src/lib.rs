//! Exact ratios for resamplers: the best L/M under the bounds of a filter bank, proof that it is the best, and
//! what to do when no single ratio is good enough.
//!
//! Pure arithmetic: no clock, no file, no randomness. Nothing is rounded except where a result is an `f64` by
//! name (residuals, seconds, filter costs), and nothing overflows, for targets of up to 128 bits and bounds of
//! up to 2^63 − 1 ([`big`] takes targets of any size).
//!
//! # From two rates to a ratio
//!
//! A stream crosses from a source clock to a sink clock. The *target* is the sink's true rate over the
//! source's; a *ratio* L/M makes L output samples of M input samples; its *residual* is (L/M)/target − 1.
//!
//! ```
//! use ratewright_ratio::{Bounds, Cadence, Claim, Fraction, Side, best, parse_rate, parse_target};
//! use ratewright_ratio::{residual, target_from_rates};
//!
//! let bounds = Bounds::new(256, 256)?;
//! let nominal = target_from_rates(parse_rate("44.1k")?, parse_rate("48k")?)?;
//! let answer = best(&nominal, &bounds);
//! assert_eq!(answer.ratio, Fraction::new(160, 147));
//! assert_eq!(residual(&answer.ratio, &nominal), 0.0);
//!
//! // Whoever receives the answer checks it with a few multiplications.
//! let claim = Claim::Nearest {
//!     ratio: answer.ratio,
//!     target: &nominal,
//!     region: (&bounds).into(),
//!     side: Side::Either,
//! };
//! assert_eq!(answer.certificate.verify(&claim), Ok(()));
//!
//! // Real clocks are off by some parts in a million, and then no small ratio is near:
//! let real = parse_target("1.088475801")?;
//! assert!(residual(&best(&real, &bounds).ratio, &real).abs() > 1e-6);
//! // two ratios in turn keep the average exactly, within half a sample all the time.
//! let mut state = Cadence::new(&real, &bounds)?.start();
//! let block = state.next_block();
//! assert!(block == state.cadence().low() || block == state.cadence().high());
//! # Ok::<(), Box<dyn std::error::Error>>(())
//! ```
//!
//! # The gap
//!
//! Around p/q nothing else with a denominator up to Q lies nearer than 1/(q·Q): two fractions differ by at
//! least one over the product of their denominators. Near 160/147 with Q = 1024 that is 6 parts in a million,
//! near 1/1 a thousand. Crystals are off by up to a hundred, so two clocks of one nominal rate cannot be
//! joined by one small ratio at all; hence the pair.
//!
//! # Chapters
//!
//! Each states its theorem with a sketch of the proof, its cost, and its corner cases.
//!
//! 1. **Numbers.** [`exact`](mod@exact): targets and residuals. [`rate`]: from text. [`big`]: beyond 128 bits.
//! 2. **What is allowed.** [`bounds`]: the box, prime factors. [`region`]: products, weighted sums.
//! 3. **The best ratio.** [`bracket`]: the theorem everything rests on, and the search. [`nearest`]: the answer,
//!    on either side or one. [`many`]: many targets at once. [`multiple`], [`accumulator`], [`smooth`],
//!    [`smooth_table`], [`outward`](mod@outward): L or M a multiple, M fixed or a power of two, prime factors, anything else.
//! 4. **The simplest ratio.** [`interval`], [`simplest`](mod@simplest).
//! 5. **The trade-off.** [`ladder`](mod@ladder): error against size, in runs. [`front`](mod@front): against a cost.
//! 6. **Proof.** [`certificate`]: what a receiver checks.
//! 7. **Two ratios in turn.** [`balance`]: the rule. [`cadence`]: at block ends. [`stepping`]: at any output.
//!    [`lazy`]: with few changes. [`frames`]: samples a video frame.
//! 8. **Filters.** [`kaiser`]: how long. [`stages`]: one or several. [`sideband`]: what errors in time sound like.
//! 9. **Everything together.** [`plan`].
//!
//! # Signs
//!
//! - residual = (L/M)/target − 1: positive makes more output than is wanted.
//! - error of a cadence, a lazy cadence or a stepping = outputs made − outputs wanted.
//! - Of ratios equally near the one with the smaller M is taken, then the one with the smaller L.
//! - Best for t is not always the inverse of best for 1/t: the error is |t − L/M|, in outputs an input.
//!
//! # Checks beyond the tests
//!
//! - `cargo run --release -p ratewright-ratio --example brute_force`: 10^8 cases against brute force.
//! - `cargo run --release -p ratewright-ratio --example cadence_billion`: 10^9 samples against the stated bounds.
//! - `cargo bench -p ratewright-ratio`: times as ratios to the bare chain of divisions; the head of
//!   `benches/ratio/main.rs` has the figures, the goals, and why some are missed.
//! - `cargo +nightly fuzz run public_functions`, in this crate's folder: any input against big integers.

pub mod accumulator;
pub mod allowed;
pub mod balance;
pub mod big;
pub mod bounds;
pub mod bracket;
pub mod cadence;
pub mod certificate;
pub mod exact;
pub mod frames;
pub mod front;
pub mod interval;
pub mod kaiser;
pub mod ladder;
pub mod lazy;
pub mod many;
pub mod multiple;
mod narrow;
pub mod nearest;
pub mod outward;
pub mod plan;
pub mod rate;
pub mod region;
pub mod sideband;
pub mod simplest;
pub mod smooth;
pub mod smooth_table;
pub mod stages;
pub mod stepping;
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
pub use ladder::{Rung, ladder, ladder_in};
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
