//! Samples per video frame, at both rates.

use num_rational::Ratio;
use ratewright_ratio::{FrameCadence, FrameError, FrameOrder};

use super::question::Question;
use crate::failure::Failure;

/// Most frames that are listed.
pub(crate) const LISTED_FRAMES: u64 = 4_096;

/// The samples each video frame takes from the source and from the sink, at nominal rates.
#[derive(Debug)]
pub(crate) struct Frames {
    pub(crate) rate: Ratio<u64>,
    pub(crate) source: FrameCadence,
    pub(crate) sink: FrameCadence,
}

impl Question {
    /// The frames asked for.
    pub(crate) fn frames(&self) -> Result<Option<Frames>, Failure> {
        let Some((rate, (source, sink))) = self.frame_rate.zip(self.rates) else {
            return Ok(None);
        };
        let of = |audio| FrameCadence::new(audio, rate, FrameOrder::Smpte272m).map_err(refused);
        Ok(Some(Frames {
            rate,
            source: of(source)?,
            sink: of(sink)?,
        }))
    }
}

/// The samples of the first frames, up to `most` and up to the period.
pub(crate) fn listed(cadence: &FrameCadence, most: u64) -> impl Iterator<Item = u64> {
    (0..cadence.period_frames().min(most)).map(|frame| cadence.samples_in(frame))
}

/// How many frames of the period take which number of samples; those that take more first.
pub(crate) fn shares(cadence: &FrameCadence) -> Vec<(u64, u64)> {
    let (samples, frames) = (cadence.period_samples(), cadence.period_frames());
    let (fewer, longer) = (samples / frames, samples % frames);
    let shares = [(longer, fewer + 1), (frames - longer, fewer)];
    shares.into_iter().filter(|share| share.0 > 0).collect()
}

fn refused(error: FrameError) -> Failure {
    Failure::Usage(format!("--frames: {error}"))
}
