//! Questions to the engine: they change nothing.

use crate::engine::Engine;
use crate::timeline::as_double;
use crate::{ClockDeclaration, ClockEstimate, CrossingDeclaration, CrossingStatus, HouseNs, Id};

impl Engine {
    /// Epoch of the settings that are made now.
    pub fn epoch(&self) -> u64 {
        self.epoch
    }

    /// All clocks, by name.
    pub fn clocks(&self) -> impl Iterator<Item = &ClockDeclaration> {
        self.clocks.iter().map(|record| &record.declaration)
    }

    /// A clock's declaration.
    pub fn clock(&self, id: &Id) -> Option<&ClockDeclaration> {
        self.clocks.get(id).map(|record| &record.declaration)
    }

    /// All crossings, by name.
    pub fn crossings(&self) -> impl Iterator<Item = &CrossingDeclaration> {
        self.crossings.values().map(|record| &record.declaration)
    }

    /// A crossing's declaration.
    pub fn crossing(&self, id: &Id) -> Option<&CrossingDeclaration> {
        self.crossings.get(id).map(|record| &record.declaration)
    }

    /// A clock's estimate against house time at `now`; earlier times than the latest seen count
    /// as that one.
    pub fn estimate(&self, id: &Id, now: HouseNs) -> Option<ClockEstimate> {
        self.clocks.described(id, now.max(self.now_ns))
    }

    /// How a crossing stands at `now`, its account carried on to there; earlier times than the
    /// latest seen count as that one.
    pub fn status(&self, id: &Id, now: HouseNs) -> Option<CrossingStatus> {
        let now = now.max(self.now_ns);
        let ends = self.ends(id, now)?;
        let mut record = self.crossings.get(id)?.clone();
        record.advance(now, &ends);
        let outlook = record.outlook(&ends);
        let slip = record.newest.as_ref().and_then(|newest| {
            let until_effect_ns = newest.effect_ns.saturating_sub(now).max(0);
            let path = (newest.effect_ns, newest.average());
            let room = record.declaration.headroom_samples - newest.error();
            let after_effect_s = record.slip_under(path, room, now, &ends)?;
            Some(until_effect_ns as f64 * 1e-9 + after_effect_s)
        });
        Some(CrossingStatus {
            state: record.state,
            reason: record.why(),
            target: ends.target.value,
            target_low: ends.target.low,
            target_high: ends.target.high,
            residual: record
                .newest
                .as_ref()
                .map(|newest| as_double(&newest.average()) / ends.target.value - 1.0),
            phase_error_samples: outlook.phase,
            phase_deviation_samples: outlook.deviation(0.0),
            seconds_to_slip: slip,
            seconds_vouched: if record.pin.is_some() {
                slip
            } else {
                record.vouched(&ends)
            },
            source: record.source().clone(),
            pin: record.pin.as_deref().cloned(),
            needed: record.needed.as_deref().copied(),
            settings_made: record.settings_made.into(),
            changes_made: record.changes_made.into(),
            setting: record.newest.as_ref().map(|newest| newest.setting(id)),
        })
    }
}
