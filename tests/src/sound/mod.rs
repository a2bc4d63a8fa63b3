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
//!
//! # Figures
//! `cargo run --release -p ratewright-tests --example sound -- 6` printed this, seed 1, at 100 house seconds a
//! second: 44.1 kHz to 48 kHz, L and M up to 1024, six hours of stream with half a sample of headroom,
//! which cannot put the average frequency off by more than 0.965 ppb. Readings come in real time, so
//! that no two runs are the same. Both tones have the same frequency error. The spectrum is that of the
//! setting in the middle of the stream; what is nearer to the tone than 0.046 Hz is not told from it.
//!
//! | way | FIFO from its centre | phase error | settings | average off by | fitted | 1 kHz: worst spur | 19 kHz: worst spur | 19 kHz: from 20 Hz on |
//! | --- | --- | --- | --- | --- | --- | --- | --- | --- |
//! | cadence | −1 to 0 | −0.335 to 0.335 | 65 | 0.202 ppb | 0.075 ppb | −78.8 dB at 2.0 Hz | −53.2 dB at 2.0 Hz | −76.7 dB |
//! | stepping | −1 to 0 | −0.340 to 0.347 | 66 | 0.177 ppb | 0.024 ppb | −93.1 dB at 8.1 kHz | −67.5 dB at 1.9 kHz | −67.5 dB |
//! | lazy | −1 to 0 | −0.323 to 0.322 | 63 | 0.093 ppb | 0.088 ppb | −47.6 dB at 0.05 Hz | −23.3 dB at 0.05 Hz | −108.3 dB |
//!
//! Every setting took effect at the first block end at or after its instant. In another run, whose
//! spectrum was taken over 350 s, the worst line of lazy switching was 0.040 Hz from the tone, with
//! −45.7 dB at 1 kHz and −19.2 dB at 19 kHz. That run counts for nothing else: its players, behind on a
//! busy machine, held up the readings for as much as an hour of house time, as they no longer can, and
//! the phase error went to 8.6 samples.

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
