//! What the audio thread says.

use crate::SettingNumber;
use crate::cells::Words;

/// Words of an [`Applied`].
pub(crate) const APPLIED_WORDS: usize = 6;

/// Words of a [`Level`].
pub(crate) const LEVEL_WORDS: usize = 2;

/// What truly took effect.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Applied {
    /// Which setting.
    pub number: SettingNumber,
    /// The sink's count at the block end.
    pub sink_sample: u64,
    /// Which run of the counter.
    pub counter_epoch: u64,
    /// House time of the block end, ns, by the timescale of that moment.
    pub house_ns: i64,
    /// Its standard deviation, ns.
    pub deviation_ns: f64,
}

/// How full the audio thread's buffer was.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Level {
    /// Level from the centre, sink samples; positive is fuller.
    pub level_samples: f64,
    /// The sink's count at that moment.
    pub sink_sample: u64,
}

impl Words<APPLIED_WORDS> for Applied {
    fn to_words(&self) -> [u64; APPLIED_WORDS] {
        [
            self.number.epoch,
            self.number.number,
            self.sink_sample,
            self.counter_epoch,
            self.house_ns.cast_unsigned(),
            self.deviation_ns.to_bits(),
        ]
    }

    fn from_words(words: [u64; APPLIED_WORDS]) -> Self {
        let [epoch, number, sink_sample, counter_epoch, house, deviation] = words;
        Self {
            number: SettingNumber { epoch, number },
            sink_sample,
            counter_epoch,
            house_ns: house.cast_signed(),
            deviation_ns: f64::from_bits(deviation),
        }
    }
}

impl Words<LEVEL_WORDS> for Level {
    fn to_words(&self) -> [u64; LEVEL_WORDS] {
        [self.level_samples.to_bits(), self.sink_sample]
    }

    fn from_words([level, sink_sample]: [u64; LEVEL_WORDS]) -> Self {
        Self {
            level_samples: f64::from_bits(level),
            sink_sample,
        }
    }
}
