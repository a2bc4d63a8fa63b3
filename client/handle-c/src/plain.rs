//! The structures of the header, and what they mean.

use ratewright_handle::{Applied, Block, Cue, Level, Realised, SettingNumber, Timescale};
use ratewright_ratio::{Cadence, Exact, Fraction, Stepping};

use crate::Status;

/// `rw_run`.
#[derive(Clone, Copy, Debug)]
#[repr(C)]
pub struct RwRun {
    /// An `rw_kind`.
    pub kind: u32,
    /// Numerator of the long-run average.
    pub wanted_numerator: u64,
    /// Its denominator.
    pub wanted_denominator: u64,
    /// L of the one or the lower ratio.
    pub low_l: u64,
    /// M of the one or the lower ratio.
    pub low_m: u64,
    /// L of the higher ratio.
    pub high_l: u64,
    /// M of the higher ratio.
    pub high_m: u64,
    /// Phases of the table.
    pub phases: u64,
    /// Swing of a lazy pair, output samples.
    pub swing_samples: f64,
}

/// `rw_setting`.
#[derive(Clone, Copy, Debug)]
#[repr(C)]
pub struct RwSetting {
    /// Epoch of its number.
    pub epoch: u64,
    /// Its number.
    pub number: u64,
    /// What to run.
    pub run: RwRun,
    /// House time of the effect, ns.
    pub effect_ns: i64,
    /// House time of the expiry, ns.
    pub expiry_ns: i64,
}

/// `rw_timescale`.
#[derive(Clone, Copy, Debug)]
#[repr(C)]
pub struct RwTimescale {
    /// Which run of the counter.
    pub counter_epoch: u64,
    /// The count at `house_ns`.
    pub sample: u64,
    /// House time, ns.
    pub house_ns: i64,
    /// Samples a second of house time.
    pub rate_hz: f64,
    /// Standard deviation of `house_ns`, ns.
    pub deviation_ns: f64,
}

/// `rw_applied`.
#[derive(Clone, Copy, Debug)]
#[repr(C)]
pub struct RwApplied {
    /// Epoch of the setting's number.
    pub epoch: u64,
    /// The setting's number.
    pub number: u64,
    /// The sink's count at the block end.
    pub sink_sample: u64,
    /// Which run of the counter.
    pub counter_epoch: u64,
    /// House time of the block end, ns.
    pub house_ns: i64,
    /// Its standard deviation, ns.
    pub deviation_ns: f64,
}

/// `rw_level`.
#[derive(Clone, Copy, Debug)]
#[repr(C)]
pub struct RwLevel {
    /// Level from the centre, sink samples.
    pub level_samples: f64,
    /// The sink's count at that moment.
    pub sink_sample: u64,
}

/// `rw_block`.
#[derive(Clone, Copy, Debug, Default)]
#[repr(C)]
pub struct RwBlock {
    /// Phases of the filter.
    pub l: u64,
    /// Phases to advance for each output.
    pub m: u64,
    /// Outputs to make.
    pub outputs: u64,
}

impl RwRun {
    pub(crate) fn realised(&self) -> Result<Realised, Status> {
        match self.kind {
            1 => Ok(Realised::Single(ratio(self.low_l, self.low_m)?)),
            2 => Ok(Realised::Cadence(self.cadence()?)),
            3 => {
                let stepping = Stepping::new(&self.wanted()?, self.phases);
                stepping.map(Realised::Stepping).map_err(|_| Status::BadRun)
            }
            4 => Ok(Realised::Lazy {
                cadence: self.cadence()?,
                swing_samples: self.swing_samples,
            }),
            _ => Err(Status::BadRun),
        }
    }

    fn wanted(&self) -> Result<Exact, Status> {
        let wanted = ratio(self.wanted_numerator, self.wanted_denominator)?;
        Ok(ratewright_ratio::exact(&wanted))
    }

    fn cadence(&self) -> Result<Cadence, Status> {
        let low = ratio(self.low_l, self.low_m)?;
        let high = ratio(self.high_l, self.high_m)?;
        Cadence::of_pair(&self.wanted()?, low, high).map_err(|_| Status::BadRun)
    }
}

fn ratio(l: u64, m: u64) -> Result<Fraction, Status> {
    if l == 0 || m == 0 {
        return Err(Status::BadRun);
    }
    Ok(Fraction::new(l, m))
}

impl RwSetting {
    pub(crate) fn cue(&self) -> Result<Cue, Status> {
        Ok(Cue {
            number: SettingNumber {
                epoch: self.epoch,
                number: self.number,
            },
            realised: self.run.realised()?,
            effect_ns: self.effect_ns,
            expiry_ns: self.expiry_ns,
        })
    }
}

impl From<&RwTimescale> for Timescale {
    fn from(plain: &RwTimescale) -> Self {
        Self {
            counter_epoch: plain.counter_epoch,
            sample: plain.sample,
            house_ns: plain.house_ns,
            rate_hz: plain.rate_hz,
            deviation_ns: plain.deviation_ns,
        }
    }
}

impl From<Applied> for RwApplied {
    fn from(applied: Applied) -> Self {
        Self {
            epoch: applied.number.epoch,
            number: applied.number.number,
            sink_sample: applied.sink_sample,
            counter_epoch: applied.counter_epoch,
            house_ns: applied.house_ns,
            deviation_ns: applied.deviation_ns,
        }
    }
}

impl From<Level> for RwLevel {
    fn from(level: Level) -> Self {
        Self {
            level_samples: level.level_samples,
            sink_sample: level.sink_sample,
        }
    }
}

impl From<Block> for RwBlock {
    fn from(block: Block) -> Self {
        Self {
            l: block.l,
            m: block.m,
            outputs: block.outputs,
        }
    }
}
