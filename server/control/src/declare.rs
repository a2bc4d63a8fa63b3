//! Declarations: clocks and crossings come, change and go.

use crate::engine::Engine;
use crate::record::CrossingRecord;
use crate::schedule::Subject;
use crate::{
    ClockDeclaration, CrossingDeclaration, Effects, HouseNs, Id, Reason, Refusal, Transition,
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
        self.schedule
            .set(Subject::Clock(declaration.id.clone()), now);
        let users: Vec<Id> = self.users(&declaration.id).cloned().collect();
        for crossing in users {
            self.rates_changed(&crossing, now, effects);
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
            let (source, sink) = (&record.declaration.source, &record.declaration.sink);
            let pair = if *source == declaration.id {
                of(sink).map(|sink| (declaration, sink))
            } else {
                of(source).map(|source| (source, declaration))
            };
            if let Some((source, sink)) = pair {
                CrossingDeclaration::check_rates("nominal_hz", source, sink)?;
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

    /// The account of a crossing begins anew at other nominal rates.
    fn rates_changed(&mut self, crossing: &Id, now: HouseNs, effects: &mut Effects) {
        let Some(record) = self.crossings.get_mut(crossing) else {
            return;
        };
        let hz = |id: &Id| self.clocks.get(id).map(|clock| clock.declaration.hz());
        let declaration = &record.declaration;
        if let (Some(source_hz), Some(sink_hz)) = (hz(&declaration.source), hz(&declaration.sink)) {
            record.ledger.change_rates(now, source_hz, sink_hz);
            record.forced = record.forced.or(Some(Reason::Declaration));
            effects.transitions.push(Transition::Centred {
                crossing: crossing.clone(),
                phase_error_samples: 0.0,
                reason: "a clock of it was declared anew".to_owned(),
            });
        }
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
        self.clocks.delete(id);
        self.schedule.remove(&Subject::Clock(id.clone()));
        Ok(())
    }

    pub(crate) fn declare_crossing(
        &mut self,
        declaration: &CrossingDeclaration,
        now: HouseNs,
    ) -> Result<(), Refusal> {
        declaration.check()?;
        let source = self.end("source", &declaration.source)?;
        let sink = self.end("sink", &declaration.sink)?;
        CrossingDeclaration::check_rates("sink", source, sink)?;
        self.check_group(declaration)?;
        match self
            .crossings
            .get(&declaration.id)
            .map(|record| record.declaration.clone())
        {
            None => {
                let record =
                    CrossingRecord::new(declaration.clone(), source, sink, self.numbers_gone);
                self.crossings.insert(declaration.id.clone(), record);
            }
            Some(old) if old == *declaration => return Ok(()),
            Some(old) => {
                let rates = (source.hz(), sink.hz());
                self.detach(&old);
                self.redeclare(&old, declaration, rates, now);
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
        let Some(members) = self.groups.get(group) else {
            return Ok(());
        };
        if members.len() < MAX_GROUP || members.contains(&declaration.id) {
            return Ok(());
        }
        let accepted = format!("a group with fewer than {MAX_GROUP} crossings");
        Err(Refusal::precondition("group", group, accepted))
    }

    fn redeclare(
        &mut self,
        old: &CrossingDeclaration,
        new: &CrossingDeclaration,
        hz: (f64, f64),
        now: HouseNs,
    ) {
        let Some(record) = self.crossings.get_mut(&new.id) else {
            return;
        };
        record.declaration = new.clone();
        if (&old.source, &old.sink) != (&new.source, &new.sink) {
            record.ledger.change_rates(now, hz.0, hz.1);
        }
        let names_only = CrossingDeclaration {
            display_name: old.display_name.clone(),
            group: old.group.clone(),
            lead_ns: old.lead_ns,
            review_horizon_ns: old.review_horizon_ns,
            ..new.clone()
        };
        if names_only != *old {
            record.forced = record.forced.or(Some(Reason::Declaration));
        }
    }

    /// Enters a crossing where it is looked up, and makes it due.
    fn attach(&mut self, declaration: &CrossingDeclaration, now: HouseNs) {
        for clock in [&declaration.source, &declaration.sink] {
            if let Some(clock) = self.clocks.get_mut(clock) {
                clock.crossings.insert(declaration.id.clone());
            }
        }
        if let Some(group) = &declaration.group {
            self.groups
                .entry(group.clone())
                .or_default()
                .insert(declaration.id.clone());
        }
        self.schedule.set(subject_of(declaration), now);
    }

    fn detach(&mut self, declaration: &CrossingDeclaration) {
        for clock in [&declaration.source, &declaration.sink] {
            if let Some(clock) = self.clocks.get_mut(clock) {
                clock.crossings.remove(&declaration.id);
            }
        }
        let Some(group) = &declaration.group else {
            self.schedule
                .remove(&Subject::Crossing(declaration.id.clone()));
            return;
        };
        let members = self.groups.entry(group.clone()).or_default();
        members.remove(&declaration.id);
        if members.is_empty() {
            self.groups.remove(group);
            self.schedule.remove(&Subject::Group(group.clone()));
        }
    }

    pub(crate) fn delete_crossing(&mut self, id: &Id) -> Result<(), Refusal> {
        let Some(record) = self.crossings.remove(id) else {
            return Err(Refusal::not_found(
                "crossing",
                id,
                "a crossing that was declared",
            ));
        };
        self.numbers_gone = self.numbers_gone.max(record.last_number);
        self.detach(&record.declaration);
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
