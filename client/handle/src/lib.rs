//! The ratio of an audio thread's next block: wait-free, without allocation or system call.
//!
//! [`handle`] makes a pair. The [`Writer`] belongs to whoever hears of settings; the [`Reader`] to
//! the one thread that resamples.
//!
//! | the writer's thread | the audio thread |
//! | --- | --- |
//! | [`Writer::arm`]: a setting, before its instant of effect | [`Reader::next_block`] at every block end |
//! | [`Writer::set_timescale`]: where the sink's count of samples stands in house time, again and again | [`Reader::restart`] when the sink began to count anew |
//! | [`Writer::next_applied`]: what truly took effect, when | [`Reader::set_level`]: how full its buffer is |
//! | [`Writer::level`], [`Writer::trim`] | [`Reader::is_expired`] |
//!
//! # What the audio thread may rely on
//! - A setting takes effect at the first block end at or after its instant; one that comes late at
//!   the next block end; never an older one after a newer one.
//! - Cadences, steppings and lazy pairs run here, in exact integers. At a change the fractional
//!   error that is running is carried over, so nothing adds up over many changes.
//! - Past its expiry a setting goes on, and [`Reader::is_expired`] says so.
//! - Neither thread ever waits for the other: messages lie in cells of atomic words that change
//!   hands by one swap each. `RUSTFLAGS="--cfg loom" cargo test -p ratewright-handle --release model`
//!   tries the interleavings.
//!
//! # Signs and units
//! House time in ns. Samples are those of the sink. Errors and levels: outputs made − outputs
//! wanted; positive fills a buffer after the resampler.
//!
//! # Examples
//! ```
//! use ratewright_handle::{Cue, Realised, SettingNumber, Timescale, handle};
//! use ratewright_ratio::{Bounds, Cadence, Exact, Fraction};
//!
//! let (mut writer, mut reader) = handle(&Realised::Single(Fraction::new(1, 1)))?;
//! // The sink had counted 48 000 samples when house time was 1 s, and runs at 48 kHz.
//! writer.set_timescale(&Timescale {
//!     counter_epoch: 0,
//!     sample: 48_000,
//!     house_ns: 1_000_000_000,
//!     rate_hz: 48_000.0,
//!     deviation_ns: 10_000.0,
//! })?;
//! writer.arm(&Cue {
//!     number: SettingNumber { epoch: 1, number: 1 },
//!     realised: Realised::Cadence(Cadence::new(&Exact::new(10_001, 10_000), &Bounds::new(256, 256)?)?),
//!     effect_ns: 2_000_000_000,
//!     expiry_ns: 3_600_000_000_000,
//! })?;
//!
//! let mut sink_sample = 95_990;
//! let mut outputs = |reader: &mut ratewright_handle::Reader| {
//!     let block = reader.next_block(sink_sample);
//!     // ... make `block.outputs` outputs at block.l / block.m ...
//!     sink_sample += block.outputs;
//! };
//! (0..10).for_each(|_| outputs(&mut reader));
//! assert!(writer.next_applied().is_none(), "2 s are sample 96 000");
//! outputs(&mut reader);
//! let applied = writer.next_applied().expect("it took effect");
//! assert_eq!((applied.sink_sample, applied.house_ns), (96_000, 2_000_000_000));
//! # Ok::<(), Box<dyn std::error::Error>>(())
//! ```

mod block;
mod cells;
mod cue;
mod latest;
mod line;
mod plan;
mod queue;
mod reader;
mod realised;
mod report;
mod sync;
mod table;
mod timescale;
mod trim;
mod writer;

#[cfg(all(test, loom))]
mod model;

pub use block::Block;
pub use cue::{ArmError, Cue, SettingNumber};
pub use line::SinkLine;
pub use reader::Reader;
pub use realised::Realised;
pub use report::{Applied, Level};
pub use timescale::{Timescale, TimescaleError};
pub use trim::{Trim, TrimError};
pub use writer::Writer;

use block::Running;
use plan::Plan;

/// A writer and its reader, which runs `initial` until the first setting takes effect: as a rule the
/// nominal ratio, sink rate over source rate.
///
/// # Errors
/// [`ArmError`] if `initial` is a lazy pair whose swing cannot be kept.
pub fn handle(initial: &Realised) -> Result<(Writer, Reader), ArmError> {
    Plan::new(initial)?;
    let (tables, table) = latest::latest();
    let (timescales, timescale) = latest::latest();
    let (levels, level) = latest::latest();
    let (applied, reports) = queue::queue(writer::REPORTS);
    let running = Running::start(initial);
    Ok((
        Writer::new(tables, timescales, reports, level),
        Reader::new(running, table, timescale, applied, levels),
    ))
}
