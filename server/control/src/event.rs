//! What can happen: the only way in.

use ratewright_timing::Measurement;
use serde::{Deserialize, Serialize};

use crate::{ClockDeclaration, CrossingDeclaration, HouseNs, Id};

/// What a reading is read against.
#[derive(Clone, Debug, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
pub enum Reference {
    /// House time.
    House,
    /// Another clock, usually the reporter's host; its own readings lead on to house time.
    Clock(Id),
}

/// One measurement of a clock against a reference by a probe.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Reading {
    /// The clock that was read.
    pub clock: Id,
    /// What it was read against.
    pub reference: Reference,
    /// Who read it: 1 to 63 bytes; readings of different probes are never mixed.
    pub probe: String,
    /// The probe's numbering, rising; 0 lets the engine count.
    pub sequence: u64,
    /// What was read.
    pub measurement: Measurement,
}

/// Everything that can happen to the engine. Journalled with the house time it was applied at.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub enum Event {
    /// Creates a clock or replaces its declaration. Another rate, or another exactness, begins
    /// its measurement anew and decides its crossings anew.
    DeclareClock(ClockDeclaration),
    /// Forgets a clock that nothing uses.
    DeleteClock(Id),
    /// Creates a crossing or replaces its declaration; a setting exists at once.
    DeclareCrossing(CrossingDeclaration),
    /// Forgets a crossing; its setting numbers are never used again.
    DeleteCrossing(Id),
    /// A measurement.
    Reading(Reading),
    /// The accountable follower says when a setting truly took effect.
    Applied {
        /// The crossing.
        crossing: Id,
        /// Epoch of the setting.
        epoch: u64,
        /// Number of the setting.
        number: u64,
        /// House time of the effect, ns.
        house_ns: HouseNs,
        /// The sink's sample count at that instant, as the follower counts; 0 if it does not. A
        /// count that falls means that the sink began anew, and one that goes at another rate than
        /// the sink's clock is a fault of that.
        sink_sample: u64,
    },
    /// The accountable follower has measured its buffer.
    Occupancy {
        /// The crossing.
        crossing: Id,
        /// Level from the centre, sink samples; positive is fuller. For a buffer after the
        /// resampler this is the phase error itself; one before it reports level·L/M.
        level_samples: f64,
        /// Standard deviation of the level, sink samples, above 0.
        deviation_samples: f64,
        /// House time of the measurement, ns.
        house_ns: HouseNs,
    },
    /// What a crossing runs stays until it is released, whatever is measured.
    Pin {
        /// The crossing.
        crossing: Id,
        /// Who says so, 1 to 128 bytes.
        by: String,
        /// Why, at most 512 bytes.
        note: String,
    },
    /// A pinned crossing is decided again.
    Release {
        /// The crossing.
        crossing: Id,
        /// Who says so, 1 to 128 bytes.
        by: String,
        /// Why, at most 512 bytes.
        note: String,
    },
    /// The stream of a crossing now comes from its other source.
    ChangeOver {
        /// The crossing.
        crossing: Id,
        /// Clock of that source: the declared source or the backup.
        source: Id,
        /// Who says so, 1 to 128 bytes.
        by: String,
        /// Why, at most 512 bytes.
        note: String,
    },
    /// Time has passed: does what is due.
    Tick,
    /// The state was restored from a backup: numbers of the new epoch are not those of the old.
    OpenEpoch {
        /// The new epoch, above the present one.
        epoch: u64,
    },
}
