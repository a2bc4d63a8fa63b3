//! From the server to the very sample: sound that crosses from one clock to another at the ratios
//! that a daemon decides.
//!
//! - `world`: the true clocks.
//! - `programme`: what is played, and how the daemon is set up.
//! - `performance`: the daemon, the reporter and the players together; `seat`: one crossing of it.
//! - `player`: counts every sample of hours; its ratio comes from a real-time handle.
//! - `recording`: sound, in stretches of those hours.
//! - `resampler`: what makes it, by a crate (`speex`) or a table of phases (`table`), at an exact
//!   `position`.
//! - `tone`: its frequency in house time, and its spectrum.
//! - `verdict`: what came of it.
//!
//! # Spurs
//! Each way of making a ratio moves the phase to and fro, and that turns a tone of f Hz by 2π f/f_sink for
//! each sample:
//!
//! - A cadence of a/b < c/d makes a sawtooth of up to (bc − ad)/min(b, d) samples from peak to peak, as
//!   often as the two take turns: its worst spur is p f/f_sink for p samples, some Hz from the tone or
//!   less.
//! - Stepping through L phases at a ratio of r makes a sawtooth of r/L samples, which folds all over the
//!   spectrum.
//! - Lazy switching swings by E samples either way, up and down straight, within tens of seconds: its
//!   two nearest lines, some hundredths of Hz from the tone, have about 8 E f/(π f_sink), and what is far
//!   from the tone falls with the square of the distance.

pub mod performance;
pub mod player;
pub mod position;
pub mod programme;
pub mod recording;
pub mod resampler;
mod seat;
pub mod speex;
pub mod table;
pub mod tone;
pub mod verdict;
pub mod world;
