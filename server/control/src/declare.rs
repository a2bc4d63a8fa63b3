//! Declarations: clocks and crossings come, change and go.

use crate::engine::Engine;
use crate::record::CrossingRecord;
use crate::schedule::{Group, NEVER, Subject};
use crate::{
    ClockDeclaration, ClockFault, CrossingDeclaration, Effects, HouseNs, Id, Reason, Refusal,
};

/// Most crossings in a group: they are decided in one go.
const MAX_GROUP: usize = 64;

impl Engine {
    pub(crate) fn declare_clock(
        &mut self,
        declaration: &ClockDeclaration,
        now: HouseNs,
        effects: &mut Effects,
    ) -> Result<(), Refusal> {
        declaration.check()?;
        self.check_partners(declaration)?;
        if !self.clocks.declare(declaration) {
            return Ok(());
        }
        // What was measured was another clock.
        self.due(Subject::Clock(declaration.id.clone()), now);
        let users: Vec<Id> = self.users(&declaration.id).cloned().collect();
        for crossing in users {
            self.rates_changed(&crossing, &declaration.id, now, effects);
        }
        self.hurry_users(&declaration.id, now);
        Ok(())
    }

    /// A new rate must suit the other ends of the clock's crossings.
    fn check_partners(&self, declaration: &ClockDeclaration) -> Result<(), Refusal> {
        let of = |id: &Id| self.clocks.get(id).map(|record| &record.declaration);
        for crossing in self.users(&declaration.id) {
            let Some(record) = self.crossings.get(crossing) else {
                continue;
            };
            let crossing = &record.declaration;
            for source in [Some(&crossing.source), crossing.backup.as_ref()]
                .into_iter()
                .flatten()
            {
                let as_declared = |id: &Id| match *id == declaration.id {
                    true => Some(declaration),
                    false => of(id),
                };
                if let (Some(source), Some(sink)) =
                    (as_declared(source), as_declared(&crossing.sink))
                {
                    CrossingDeclaration::check_rates("nominal_hz", source, sink)?;
                }
            }
        }
        Ok(())
    }

    fn users(&self, clock: &Id) -> impl Iterator<Item = &Id> {
        self.clocks
            .get(clock)
            .into_iter()
            .flat_map(|record| &record.crossings)
    }

    /// The account of a crossing begins anew at other nominal rates, if the clock is in use there.
    fn rates_changed(&mut self, id: &Id, clock: &Id, now: HouseNs, effects: &mut Effects) {
        let Some(record) = self.crossings.get_mut(id) else {
            return;
        };
        if record.source() != clock && record.declaration.sink != *clock {
            return;
        }
        record.forced = record.forced.or(Some(Reason::Declaration));
        let reason = format!("its clock {clock} was declared anew");
        effects
            .transitions
            .extend(self.centre_anew(id, now, reason));
    }

    pub(crate) fn delete_clock(&mut self, id: &Id) -> Result<(), Refusal> {
        let Some(record) = self.clocks.get(id) else {
            return Err(Refusal::not_found("clock", id, "a clock that was declared"));
        };
        if let Some(crossing) = record.crossings.first() {
            let accepted = format!("a clock that nothing uses, but crossing {crossing} does");
            return Err(Refusal::precondition("clock", id, accepted));
        }
        if let Some(clock) = record.referrers.first() {
            let accepted =
                format!("a clock that nothing uses, but clock {clock} is measured against it");
            return Err(Refusal::precondition("clock", id, accepted));
        }
        self.schedule
            .remove(Subject::Clock(id.clone()), record.due_ns);
        self.clocks.delete(id);
        Ok(())
    }

    pub(crate) fn declare_crossing(
        &mut self,
        declaration: &CrossingDeclaration,
        now: HouseNs,
        effects: &mut Effects,
    ) -> Result<(), Refusal> {
        declaration.check()?;
        let source = self.end("source", &declaration.source)?;
        let sink = self.end("sink", &declaration.sink)?;
        CrossingDeclaration::check_rates("sink", source, sink)?;
        if let Some(backup) = &declaration.backup {
            let backup = self.end("backup", backup)?;
            CrossingDeclaration::check_rates("backup", backup, sink)?;
        }
        self.check_group(declaration)?;
        match self
            .crossings
            .get(&declaration.id)
            .map(|record| record.declaration.clone())
        {
            None => {
                let record =
                    CrossingRecord::new(declaration.clone(), source, sink, self.numbers_gone);
                self.crossings
                    .insert(declaration.id.clone(), Box::new(record));
            }
            Some(old) if old == *declaration => return Ok(()),
            Some(old) => {
                if declaration.asks_for_another_setting_than(&old) {
                    self.check_unpinned(&declaration.id)?;
                    self.check_group_unpinned(&declaration.id, declaration.group.as_ref())?;
                }
                self.detach(&old);
                self.redeclare(&old, declaration, now, effects);
            }
        }
        self.attach(declaration, now);
        Ok(())
    }

    fn end(&self, field: &str, id: &Id) -> Result<&ClockDeclaration, Refusal> {
        let record = self.clocks.get(id).map(|record| &record.declaration);
        record.ok_or_else(|| Refusal::not_found(field, id, "a clock that was declared"))
    }

    fn check_group(&self, declaration: &CrossingDeclaration) -> Result<(), Refusal> {
        let Some(group) = &declaration.group else {
            return Ok(());
        };
        let Some(Group { members, .. }) = self.groups.get(group) else {
            return Ok(());
        };
        if members.len() < MAX_GROUP || members.contains(&declaration.id) {
            return Ok(());
        }
        let accepted = format!("a group with fewer than {MAX_GROUP} crossings");
        Err(Refusal::precondition("group", group, accepted))
    }

    /// Takes another declaration. The stream goes on coming from the clock it came from, if that is
    /// still one of the two sources.
    fn redeclare(
        &mut self,
        old: &CrossingDeclaration,
        new: &CrossingDeclaration,
        now: HouseNs,
        effects: &mut Effects,
    ) {
        let Some(record) = self.crossings.get_mut(&new.id) else {
            return;
        };
        let source_before = record.source().clone();
        record.declaration = new.clone();
        record.on_backup =
            new.backup.as_ref() == Some(&source_before) && new.source != source_before;
        if new.asks_for_another_setting_than(old) {
            record.forced = record.forced.or(Some(Reason::Declaration));
        }
        let reason = if *record.source() != source_before || new.sink != old.sink {
            "it was declared between other clocks"
        } else if new.silent != old.silent && new.silent {
            "it was declared silent: nobody runs its settings from now on"
        } else if new.silent != old.silent {
            "it is no longer silent: what a trial would have added up to is not what runs"
        } else {
            return;
        };
        effects
            .transitions
            .extend(self.centre_anew(&new.id, now, reason.to_owned()));
    }

    /// Enters a crossing where it is looked up, and makes it due.
    fn attach(&mut self, declaration: &CrossingDeclaration, now: HouseNs) {
        for clock in declaration.clocks() {
            if let Some(clock) = self.clocks.get_mut(clock) {
                clock.crossings.insert(declaration.id.clone());
            }
        }
        if let Some(group) = &declaration.group {
            self.groups
                .entry(group.clone())
                .or_default()
                .members
                .insert(declaration.id.clone());
        }
        self.due(subject_of(declaration), now);
    }

    fn detach(&mut self, declaration: &CrossingDeclaration) {
        for clock in declaration.clocks() {
            if let Some(clock) = self.clocks.get_mut(clock) {
                clock.crossings.remove(&declaration.id);
            }
        }
        let Some(id) = &declaration.group else {
            let held = self.crossings.get(&declaration.id);
            let due_ns = held.map_or(NEVER, |record| record.due_ns);
            self.schedule.remove(subject_of(declaration), due_ns);
            return;
        };
        let group = self.groups.entry(id.clone()).or_default();
        group.members.remove(&declaration.id);
        if group.members.is_empty() {
            let due_ns = group.due_ns;
            self.groups.remove(id);
            self.schedule.remove(subject_of(declaration), due_ns);
        }
    }

    pub(crate) fn delete_crossing(
        &mut self,
        id: &Id,
        effects: &mut Effects,
    ) -> Result<(), Refusal> {
        let Some(declaration) = self.crossings.get(id).map(|r| r.declaration.clone()) else {
            return Err(Refusal::not_found(
                "crossing",
                id,
                "a crossing that was declared",
            ));
        };
        self.detach(&declaration);
        if let Some(record) = self.crossings.remove(id) {
            self.numbers_gone = self.numbers_gone.max(record.last_number);
        }
        // Its follower counts no more, so nothing would ever take that back.
        let sink = &declaration.sink;
        let fault = self
            .clocks
            .get(sink)
            .and_then(|clock| clock.fault.as_deref());
        if matches!(fault, Some(ClockFault::CountedOtherwise { .. })) {
            effects
                .transitions
                .extend(self.clocks.set_fault(sink, None));
        }
        Ok(())
    }
}

/// Under whose name a crossing is scheduled.
fn subject_of(declaration: &CrossingDeclaration) -> Subject {
    match &declaration.group {
        Some(group) => Subject::Group(group.clone()),
        None => Subject::Crossing(declaration.id.clone()),
    }
}

impl CrossingRecord {
    pub(crate) fn subject(&self) -> Subject {
        subject_of(&self.declaration)
    }
}
