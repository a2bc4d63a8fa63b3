//! The engine and its one door.

use serde::{Deserialize, Serialize};

use crate::clocks::Clocks;
use crate::{
    ClockDeclaration, ClockEstimate, CrossingDeclaration, CrossingStatus, Effects, Event, HouseNs,
    Id, Refusal,
};

/// The whole state: save it, restore it, and it continues identically.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Engine {
    epoch: u64,
    now_ns: HouseNs,
    clocks: Clocks,
}

impl Engine {
    /// An engine that knows nothing; `epoch` numbers its settings.
    pub fn new(epoch: u64) -> Self {
        Engine {
            epoch,
            now_ns: HouseNs::MIN,
            clocks: Clocks::default(),
        }
    }

    /// Applies an event that happens at house time `now`.
    ///
    /// # Errors
    /// [`Refusal`] names the field; the engine is then exactly as it was.
    pub fn apply(&mut self, event: &Event, now: HouseNs) -> Result<Effects, Refusal> {
        let _ = (event, now);
        Ok(Effects::default())
    }

    /// House time at which [`Event::Tick`] is to be applied next; absent if nothing is due ever.
    pub fn next_due(&self) -> Option<HouseNs> {
        None
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
        std::iter::empty()
    }

    /// A crossing's declaration.
    pub fn crossing(&self, _id: &Id) -> Option<&CrossingDeclaration> {
        None
    }

    /// A clock's estimate against house time at `now`.
    pub fn estimate(&self, id: &Id, now: HouseNs) -> Option<ClockEstimate> {
        self.clocks.described(id, now)
    }

    /// How a crossing stands at `now`.
    pub fn status(&self, _id: &Id, _now: HouseNs) -> Option<CrossingStatus> {
        None
    }
}
