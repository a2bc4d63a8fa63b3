//! Frames: how many audio samples each video frame takes, for any audio rate and frame rate.
//!
//! The number of samples a frame is S/F in lowest terms, so the pattern repeats after F frames and S samples.
//! Frame k (from 0) takes cum(k + 1) − cum(k) samples, cum(k) being k·S/F rounded.
//!
//! **Theorem.** Rounding to nearest keeps |cum(k) − k·S/F| ≤ 1/2 sample, floor and ceiling below 1, and every
//! frame takes ⌊S/F⌋ or ⌈S/F⌉ samples. All three give the same sum, in another order.
//!
//! **Proof.** The first is what rounding means. cum(k) = ⌊k·S/F + c⌋ with a c from 0 to below 1 for each way, and
//! ⌊x + S/F⌋ − ⌊x⌋ is ⌊S/F⌋ or ⌈S/F⌉ for every x. cum(F) = S whatever c is. ∎
//!
//! **The broadcast order.** SMPTE 272M's audio frame sequences at 29.97 frames a second are the nearest
//! rounding at 48 kHz (5 frames) and 32 kHz (15 frames). At 44.1 kHz (100 frames) its table is another one:
//! 1472 and 1471 in turn, with 1471 also in frames 23, 47 and 71 counted from 1.
//!
//! **Cost.** Two divisions a frame, wherever it is.

use num_rational::Ratio;
use serde::{Deserialize, Serialize};
use thiserror::Error;

use crate::target_from_rates;

/// In which order the frames take the smaller and the larger number of samples.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum FrameOrder {
    /// The cumulative count rounded to nearest, halves up: the smallest error.
    Nearest,
    /// The cumulative count rounded down: never ahead.
    Floor,
    /// The cumulative count rounded up: never behind.
    Ceiling,
    /// SMPTE 272M's order: nearest, but its own table for 44.1 kHz at 30000/1001 frames a second.
    #[default]
    Smpte272m,
}

/// The repeating numbers of samples a frame.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[serde(try_from = "Unchecked", into = "Unchecked")]
pub struct FrameCadence {
    samples: u64,
    frames: u64,
    order: FrameOrder,
}

/// Why there is no frame cadence.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Error)]
pub enum FrameError {
    /// A rate of zero.
    #[error("{field} is 0; accepted are positive rates")]
    ZeroRate {
        /// `audio_rate` or `frame_rate`.
        field: &'static str,
    },
    /// A period beyond 2^63 − 1 frames or samples.
    #[error(
        "{samples}/{frames} samples a frame; accepted are parts up to 2^63 − 1 in lowest terms"
    )]
    TooLong {
        /// Samples in a period.
        samples: u128,
        /// Frames in a period.
        frames: u128,
    },
}

impl FrameCadence {
    /// Samples of `audio_rate` (Hz) in frames of `frame_rate` (Hz).
    ///
    /// # Errors
    /// [`FrameError`].
    ///
    /// # Examples
    /// ```
    /// use num_rational::Ratio;
    /// use ratewright_ratio::{FrameCadence, FrameOrder};
    /// let ntsc = Ratio::new(30_000, 1_001);
    /// let cadence = FrameCadence::new(Ratio::from_integer(48_000), ntsc, FrameOrder::Smpte272m)?;
    /// let frames: Vec<u64> = (0..cadence.period_frames()).map(|k| cadence.samples_in(k)).collect();
    /// assert_eq!(frames, [1602, 1601, 1602, 1601, 1602]);
    /// # Ok::<(), ratewright_ratio::FrameError>(())
    /// ```
    pub fn new(
        audio_rate: Ratio<u64>,
        frame_rate: Ratio<u64>,
        order: FrameOrder,
    ) -> Result<Self, FrameError> {
        for (field, rate) in [("audio_rate", audio_rate), ("frame_rate", frame_rate)] {
            if *rate.numer() == 0 {
                return Err(FrameError::ZeroRate { field });
            }
        }
        let per_frame = target_from_rates(frame_rate, audio_rate).expect("neither rate is zero");
        let (samples, frames) = (*per_frame.numer(), *per_frame.denom());
        let part = |x: u128| u64::try_from(x).ok().filter(|&x| x <= crate::MAX_BOUND);
        match (part(samples), part(frames)) {
            (Some(samples), Some(frames)) => Ok(Self {
                samples,
                frames,
                order,
            }),
            _ => Err(FrameError::TooLong { samples, frames }),
        }
    }

    /// Samples in a period.
    pub fn period_samples(&self) -> u64 {
        self.samples
    }

    /// Frames in a period.
    pub fn period_frames(&self) -> u64 {
        self.frames
    }

    /// Samples in frame `index`, counted from 0 and endlessly.
    pub fn samples_in(&self, index: u64) -> u64 {
        let index = index % self.frames;
        if self.order == FrameOrder::Smpte272m && (self.samples, self.frames) == (147_147, 100) {
            let is_short = index % 2 == 1 || matches!(index, 22 | 46 | 70);
            return if is_short { 1_471 } else { 1_472 };
        }
        (self.cumulative(index + 1) - self.cumulative(index)) as u64
    }

    /// Samples in the first `count` frames of a period, by rounding.
    fn cumulative(&self, count: u64) -> u128 {
        let scaled = u128::from(count) * u128::from(self.samples);
        let frames = u128::from(self.frames);
        match self.order {
            FrameOrder::Nearest | FrameOrder::Smpte272m => (2 * scaled + frames) / (2 * frames),
            FrameOrder::Floor => scaled / frames,
            FrameOrder::Ceiling => scaled.div_ceil(frames),
        }
    }
}

#[derive(Serialize, Deserialize)]
struct Unchecked {
    samples: u64,
    frames: u64,
    order: FrameOrder,
}

impl TryFrom<Unchecked> for FrameCadence {
    type Error = FrameError;

    fn try_from(raw: Unchecked) -> Result<Self, FrameError> {
        Self::new(
            Ratio::from_integer(raw.samples),
            Ratio::from_integer(raw.frames),
            raw.order,
        )
    }
}

impl From<FrameCadence> for Unchecked {
    fn from(cadence: FrameCadence) -> Self {
        let FrameCadence {
            samples,
            frames,
            order,
        } = cadence;
        Self {
            samples,
            frames,
            order,
        }
    }
}
