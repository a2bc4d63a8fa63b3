//! The operator's hand: crossings are pinned, released, and changed over to another source. Every act
//! leaves who did it, when and why.

use crate::effects::{Act, ActKind};
use crate::engine::Engine;
use crate::record::CrossingRecord;
use crate::{Effects, HouseNs, Id, Pin, Reason, Refusal, Transition};

/// Longest name of who acts, and longest note, bytes.
const MAX_BY: usize = 128;
const MAX_NOTE: usize = 512;

/// Who acts, and why.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Hand<'a> {
    pub(crate) by: &'a str,
    pub(crate) note: &'a str,
}

impl Hand<'_> {
    fn check(&self) -> Result<(), Refusal> {
        let bytes = |text: &str| format!("{} bytes", text.len());
        if self.by.is_empty() || self.by.len() > MAX_BY {
            let accepted = format!("who acts, in 1 to {MAX_BY} bytes");
            return Err(Refusal::invalid("by", bytes(self.by), accepted));
        }
        if self.note.len() > MAX_NOTE {
            let accepted = format!("at most {MAX_NOTE} bytes");
            return Err(Refusal::invalid("note", bytes(self.note), accepted));
        }
        Ok(())
    }

    fn act(&self, crossing: &Id, at_ns: HouseNs, what: ActKind) -> Act {
        Act {
            crossing: crossing.clone(),
            by: self.by.to_owned(),
            note: self.note.to_owned(),
            at_ns,
            what,
        }
    }
}

impl Engine {
    pub(crate) fn pin(
        &mut self,
        id: &Id,
        hand: Hand<'_>,
        now: HouseNs,
        effects: &mut Effects,
    ) -> Result<(), Refusal> {
        hand.check()?;
        let record = self.declared(id)?;
        if let Some(pin) = &record.pin {
            let accepted = format!("a crossing that is not pinned, but {} has", pin.by);
            return Err(Refusal::precondition("crossing", id, accepted));
        }
        self.check_decided(id)?;
        let record = self.declared(id)?;
        record.pin = Some(Box::new(Pin {
            by: hand.by.to_owned(),
            since_ns: now,
            note: hand.note.to_owned(),
        }));
        self.acted(id, hand.act(id, now, ActKind::Pinned), now, effects);
        Ok(())
    }

    pub(crate) fn release(
        &mut self,
        id: &Id,
        hand: Hand<'_>,
        now: HouseNs,
        effects: &mut Effects,
    ) -> Result<(), Refusal> {
        hand.check()?;
        let record = self.declared(id)?;
        if record.pin.take().is_none() {
            let accepted = "a crossing that is pinned";
            return Err(Refusal::precondition("crossing", id, accepted));
        }
        self.acted(id, hand.act(id, now, ActKind::Released), now, effects);
        Ok(())
    }

    /// The stream comes from the other source from now on. Between sources of one nominal rate the
    /// account is carried over, with its uncertainty; of another, it begins anew.
    pub(crate) fn change_over(
        &mut self,
        id: &Id,
        source: &Id,
        hand: Hand<'_>,
        now: HouseNs,
        effects: &mut Effects,
    ) -> Result<(), Refusal> {
        hand.check()?;
        self.check_other_source(id, source)?;
        self.check_unpinned(id)?;
        let ends = self.known_ends(id, now)?;
        let hz = |clock: &Id| self.clocks.get(clock).map(|c| c.declaration.nominal_hz);
        let record = self.crossings.get(id).expect("its ends were found");
        let from = record.source().clone();
        let is_same_rate = hz(&from) == hz(source);
        let record = self.crossings.get_mut(id).expect("its ends were found");
        effects.transitions.extend(record.advance(now, &ends));
        record.on_backup = *source != record.declaration.source;
        let is_pending = record.ledger.timeline.last_effect_ns() > Some(now);
        if is_pending || !is_same_rate {
            record.forced = record.forced.or(Some(Reason::ChangeOver));
        }
        if is_same_rate {
            record.ledger.hand_over(now);
        } else {
            let reason = format!("the stream comes from {source} now, at another nominal rate");
            effects
                .transitions
                .extend(self.centre_anew(id, now, reason));
        }
        let what = ActKind::ChangedOver {
            from,
            to: source.clone(),
        };
        self.acted(id, hand.act(id, now, what), now, effects);
        Ok(())
    }

    fn check_other_source(&mut self, id: &Id, source: &Id) -> Result<(), Refusal> {
        let record = self.declared(id)?;
        let main = &record.declaration.source;
        let Some(backup) = &record.declaration.backup else {
            let accepted = "a crossing with a backup source";
            return Err(Refusal::precondition("crossing", id, accepted));
        };
        if source != main && source != backup {
            let accepted = format!("{main}, the declared source, or {backup}, its backup");
            return Err(Refusal::invalid("source", source, accepted));
        }
        if source == record.source() {
            let accepted = "the other source: the stream comes from this one already";
            return Err(Refusal::precondition("source", source, accepted));
        }
        Ok(())
    }

    /// Refuses what changes a pinned crossing, or one whose group is.
    pub(crate) fn check_unpinned(&self, id: &Id) -> Result<(), Refusal> {
        let Some(record) = self.crossings.get(id) else {
            return Ok(());
        };
        self.check_group_unpinned(id, record.declaration.group.as_ref())
    }

    /// The same for a crossing as a member of a group, in which it need not be yet.
    pub(crate) fn check_group_unpinned(&self, id: &Id, group: Option<&Id>) -> Result<(), Refusal> {
        let pinned = self
            .together(id, group)
            .find_map(|id| Some((id, self.crossings.get(id)?.pin.as_ref()?)));
        match pinned {
            Some((member, pin)) => {
                let accepted = format!(
                    "a crossing that is free, but {member} is pinned by {}: release it first",
                    pin.by
                );
                Err(Refusal::precondition("crossing", id, accepted))
            }
            None => Ok(()),
        }
    }

    /// A crossing with the members of a group.
    fn together<'a>(&'a self, id: &'a Id, group: Option<&Id>) -> impl Iterator<Item = &'a Id> {
        let members = group.and_then(|group| Some(&self.groups.get(group)?.members));
        members.into_iter().flatten().chain([id])
    }

    /// Refuses a pin while what was declared, or another source, is still to be decided: it would
    /// keep what must not stay.
    fn check_decided(&self, id: &Id) -> Result<(), Refusal> {
        let Some(record) = self.crossings.get(id) else {
            return Ok(());
        };
        let group = record.declaration.group.as_ref();
        let is_due = |id: &Id| self.crossings.get(id).is_some_and(|r| r.forced.is_some());
        match self.together(id, group).find(|id| is_due(id)) {
            Some(member) => {
                let accepted = format!(
                    "a crossing that is decided, but {member} waits for its setting under way: try again once \
                     that is in effect"
                );
                Err(Refusal::precondition("crossing", id, accepted))
            }
            None => Ok(()),
        }
    }

    fn declared(&mut self, id: &Id) -> Result<&mut CrossingRecord, Refusal> {
        let unknown = || Refusal::not_found("crossing", id, "a crossing that was declared");
        let record = self.crossings.get_mut(id).map(Box::as_mut);
        record.ok_or_else(unknown)
    }

    /// Keeps an act, and has the crossing looked at.
    fn acted(&mut self, id: &Id, act: Act, now: HouseNs, effects: &mut Effects) {
        effects.acts.push(act);
        self.due_crossing(id, now);
    }

    /// The account of a crossing begins anew between the clocks that it has now: with the next
    /// setting, if one is due that may be made, as what runs until then is for another stream.
    pub(crate) fn centre_anew(
        &mut self,
        id: &Id,
        now: HouseNs,
        reason: String,
    ) -> Option<Transition> {
        let is_pinned = self.check_unpinned(id).is_err();
        let record = self.crossings.get_mut(id)?;
        let hz = |id: &Id| Some(self.clocks.get(id)?.declaration.hz());
        let hz = (hz(record.source())?, hz(&record.declaration.sink)?);
        let is_due = record.forced.is_some() && !is_pinned;
        let next = is_due.then_some(record.last_number + 1);
        record.ledger.begin_anew(now, hz, next);
        record.sink_count = None;
        Some(Transition::Centred {
            crossing: id.clone(),
            phase_error_samples: 0.0,
            reason,
        })
    }
}
