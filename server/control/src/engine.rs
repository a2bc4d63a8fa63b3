//! The engine and its one door.

use std::collections::BTreeMap;

use ratewright_timing::Outcome;
use serde::{Deserialize, Serialize};

use crate::clocks::Clocks;
use crate::hand::Hand;
use crate::record::CrossingRecord;
use crate::schedule::{Group, Schedule, Subject};
use crate::sink_count::SinkCount;
use crate::{Effects, Event, HouseNs, Id, Reading, Refusal};

/// House times beyond ±2⁶² ns (146 years) count as that, so that differences fit 64 bits.
const FARTHEST_NS: HouseNs = 1 << 62;
/// Subjects that one event looks at; what is left is still due.
const MOST_AT_ONCE: usize = 64;

/// The whole state: save it, restore it, and it continues identically.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Engine {
    pub(crate) epoch: u64,
    pub(crate) now_ns: HouseNs,
    /// Highest setting number of all crossings that were ever deleted: a crossing that is
    /// declared later goes on from there, so that no number of its name is used twice.
    pub(crate) numbers_gone: u64,
    pub(crate) clocks: Clocks,
    /// Boxed, as a map's nodes are half empty.
    pub(crate) crossings: BTreeMap<Id, Box<CrossingRecord>>,
    pub(crate) groups: BTreeMap<Id, Group>,
    pub(crate) schedule: Schedule,
}

impl Engine {
    /// An engine that knows nothing; `epoch` numbers its settings.
    pub fn new(epoch: u64) -> Self {
        Engine {
            epoch,
            now_ns: -FARTHEST_NS,
            numbers_gone: 0,
            clocks: Clocks::default(),
            crossings: BTreeMap::new(),
            groups: BTreeMap::new(),
            schedule: Schedule::default(),
        }
    }

    /// Applies an event that happens at house time `now`, and does what is due by then.
    ///
    /// House time does not go back: an earlier `now` than the latest seen counts as that one.
    ///
    /// # Errors
    /// [`Refusal`] names the field; the engine is then exactly as it was.
    pub fn apply(&mut self, event: &Event, now: HouseNs) -> Result<Effects, Refusal> {
        let now = now.clamp(self.now_ns, FARTHEST_NS);
        let mut effects = Effects::default();
        match event {
            Event::DeclareClock(declaration) => {
                self.declare_clock(declaration, now, &mut effects)?
            }
            Event::DeleteClock(id) => self.delete_clock(id)?,
            Event::DeclareCrossing(declaration) => {
                self.declare_crossing(declaration, now, &mut effects)?;
            }
            Event::DeleteCrossing(id) => self.delete_crossing(id, &mut effects)?,
            Event::Reading(reading) => effects.outcome = Some(self.read(reading, now)?),
            Event::Applied {
                crossing,
                epoch,
                number,
                house_ns,
                sink_sample,
            } => {
                self.applied(crossing, (*epoch, *number), *house_ns, now)?;
                let count = SinkCount {
                    sample: *sink_sample,
                    house_ns: *house_ns,
                };
                self.counted(crossing, count, now, &mut effects);
            }
            Event::Occupancy {
                crossing,
                level_samples,
                deviation_samples,
                house_ns,
            } => {
                let level = (*level_samples, *deviation_samples);
                self.occupied(crossing, level, *house_ns, now, &mut effects)?;
            }
            Event::Pin { crossing, by, note } => {
                self.pin(crossing, Hand { by, note }, now, &mut effects)?;
            }
            Event::Release { crossing, by, note } => {
                self.release(crossing, Hand { by, note }, now, &mut effects)?;
            }
            Event::ChangeOver {
                crossing,
                source,
                by,
                note,
            } => {
                let hand = Hand { by, note };
                self.change_over(crossing, source, hand, now, &mut effects)?;
            }
            Event::Tick => {}
            Event::OpenEpoch { epoch } => self.open_epoch(*epoch)?,
        }
        self.now_ns = now;
        self.do_what_is_due(now, &mut effects);
        Ok(effects)
    }

    /// House time at which [`Event::Tick`] is to be applied next; absent if nothing is due ever.
    /// It may have passed already: one event does a bounded amount of work.
    pub fn next_due(&self) -> Option<HouseNs> {
        self.schedule.next()
    }

    fn do_what_is_due(&mut self, now: HouseNs, effects: &mut Effects) {
        for _ in 0..MOST_AT_ONCE {
            match self.schedule.take_due(now) {
                Some(Subject::Clock(id)) => self.look_at_clock(&id, now, effects),
                Some(Subject::Crossing(id)) => self.decide_alone(&id, now, effects),
                Some(Subject::Group(id)) => self.decide_group(&id, now, effects),
                None => break,
            }
        }
    }

    fn read(&mut self, reading: &Reading, now: HouseNs) -> Result<Outcome, Refusal> {
        let (outcome, is_first) = self.clocks.observe(reading, now)?;
        if is_first || matches!(outcome, Outcome::Event(_)) {
            self.due(Subject::Clock(reading.clock.clone()), now);
            self.hurry_users(&reading.clock, now);
        }
        Ok(outcome)
    }

    /// The crossings of a clock are due at once.
    pub(crate) fn hurry_users(&mut self, clock: &Id, now: HouseNs) {
        let users = self.clocks.get(clock).map(|record| &record.crossings);
        let users: Vec<Id> = users.into_iter().flatten().cloned().collect();
        for crossing in &users {
            self.due_crossing(crossing, now);
        }
    }

    fn open_epoch(&mut self, epoch: u64) -> Result<(), Refusal> {
        if epoch <= self.epoch {
            let accepted = format!("above {}, the present one", self.epoch);
            return Err(Refusal::precondition("epoch", epoch, accepted));
        }
        self.epoch = epoch;
        Ok(())
    }
}
