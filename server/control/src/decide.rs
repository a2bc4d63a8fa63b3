//! Decisions: what is done when a clock, a crossing or a group is due.

use crate::engine::Engine;
use crate::issue::Stamp;
use crate::policy::standing::Standing;
use crate::record::{Ends, Judgement};
use crate::restraint::Restraint;
use crate::schedule::Subject;
use crate::statistics::kept;
use crate::timeline::Timeline;
use crate::{CrossingState, Effects, HouseNs, Id, Reason, Transition};
use ratewright_timing::State;

/// A clock is looked at so often until it is locked, and afterwards, ns.
const CLOCK_STEPS_NS: (i64, i64) = (1_000_000_000, 10_000_000_000);

/// A member of what is decided together.
#[derive(Debug)]
struct Member {
    id: Id,
    ends: Ends,
    judgement: Judgement,
}

impl Engine {
    /// Tells a change of a clock's state, and chooses among its links.
    pub(crate) fn look_at_clock(&mut self, id: &Id, now: HouseNs, effects: &mut Effects) {
        let fault = self.clocks.check_timestamps(id, now);
        effects.transitions.extend(fault);
        self.clocks.choose_link(id, now);
        let Some(traced) = self.clocks.estimate(id, now) else {
            return;
        };
        let Some(record) = self.clocks.get_mut(id) else {
            return;
        };
        let statistics = record.statistics.take();
        if record.declaration.statistics {
            record.statistics = kept(statistics, now, &traced);
        }
        let to = traced.estimate.state;
        let from = std::mem::replace(&mut record.state, to);
        if from != to {
            let reason = traced.estimate.reason;
            effects.transitions.push(Transition::Clock {
                clock: id.clone(),
                from,
                to,
                reason,
            });
        }
        if record.links.is_empty() {
            return;
        }
        let step_ns = match to {
            State::Locked | State::Holdover => CLOCK_STEPS_NS.1,
            State::FreeRunning | State::Acquiring => CLOCK_STEPS_NS.0,
        };
        self.due(Subject::Clock(id.clone()), now.saturating_add(step_ns));
    }

    /// Decides a crossing that belongs to no group.
    pub(crate) fn decide_alone(&mut self, id: &Id, now: HouseNs, effects: &mut Effects) {
        let Some(record) = self.crossings.get(id) else {
            return;
        };
        let lead_ns = record.declaration.lead_ns;
        let restraint = record.restraint(now, lead_ns);
        let Some(mut member) = self.look_at(id, now, lead_ns, effects) else {
            return;
        };
        self.restrain(&mut member, restraint.as_ref(), now, lead_ns);
        let ends = self.settle(member, now, now.saturating_add(lead_ns), effects);
        let step_ns = self.step_ns(id, now, lead_ns, &ends);
        self.due(Subject::Crossing(id.clone()), now.saturating_add(step_ns));
    }

    /// Decides the crossings of a group: if one changes, all get a setting with the same effect.
    pub(crate) fn decide_group(&mut self, id: &Id, now: HouseNs, effects: &mut Effects) {
        let Some(ids) = self.groups.get(id).map(|group| group.members.clone()) else {
            return;
        };
        let leads = ids
            .iter()
            .filter_map(|id| Some(self.crossings.get(id)?.declaration.lead_ns));
        let lead_ns = leads.max().unwrap_or(0);
        let looked = ids
            .iter()
            .filter_map(|id| self.look_at(id, now, lead_ns, effects));
        let mut members: Vec<Member> = looked.collect();
        let restraint = self.restraint_of(&members, now, lead_ns);
        for member in &mut members {
            self.restrain(member, restraint.as_ref(), now, lead_ns);
        }
        let changes = |member: &Member| match member.judgement {
            // A newcomer begins by itself.
            Judgement::Change { reason, .. } => reason != Reason::First,
            Judgement::Pending | Judgement::Stay(_) => false,
        };
        let mut effect_ns = now.saturating_add(lead_ns);
        if members.iter().any(changes) {
            let earliest_ns = effect_ns;
            effect_ns = earliest_ns.max(self.last_effect_ns(&members));
            let is_later = effect_ns > earliest_ns;
            for member in &mut members {
                self.change_along(member, now, effect_ns, is_later);
            }
        }
        let mut step_ns = None;
        for member in members {
            let id = member.id.clone();
            let ends = self.settle(member, now, effect_ns, effects);
            let own_ns = self.step_ns(&id, now, lead_ns, &ends);
            step_ns = Some(step_ns.map_or(own_ns, |least_ns: i64| least_ns.min(own_ns)));
        }
        if let Some(step_ns) = step_ns {
            self.due(Subject::Group(id.clone()), now.saturating_add(step_ns));
        }
    }

    /// Latest effect of the settings of these members: no change can take effect before it.
    fn last_effect_ns(&self, members: &[Member]) -> HouseNs {
        let timelines = members
            .iter()
            .filter_map(|member| Some(&self.crossings.get(&member.id)?.ledger.timeline));
        timelines
            .filter_map(Timeline::last_effect_ns)
            .max()
            .unwrap_or(HouseNs::MIN)
    }

    /// A member that could have stayed changes with the others. One that changes anyhow keeps its
    /// choice, unless that was made for an earlier effect.
    fn change_along(&self, member: &mut Member, now: HouseNs, effect_ns: HouseNs, is_later: bool) {
        let reason = match member.judgement {
            Judgement::Change { .. } if !is_later => return,
            Judgement::Change { reason, .. } => reason,
            Judgement::Pending | Judgement::Stay(_) => Reason::Group,
        };
        if let Some(record) = self.crossings.get(&member.id) {
            let lead_s = seconds(effect_ns.saturating_sub(now));
            let choice = record.choose_anew(now, &member.ends, lead_s);
            member.judgement = Judgement::Change {
                choice: Box::new(choice),
                reason,
            };
        }
    }

    /// Brings a crossing's account up to now and judges it.
    fn look_at(
        &mut self,
        id: &Id,
        now: HouseNs,
        lead_ns: i64,
        effects: &mut Effects,
    ) -> Option<Member> {
        let ends = self.ends(id, now)?;
        let record = self.crossings.get_mut(id)?;
        effects.transitions.extend(record.advance(now, &ends));
        let judgement = record.judge(now, &ends, seconds(lead_ns));
        Some(Member {
            id: id.clone(),
            ends,
            judgement,
        })
    }

    /// What keeps any of the members from changing.
    fn restraint_of(&self, members: &[Member], now: HouseNs, lead_ns: i64) -> Option<Restraint> {
        let records = members
            .iter()
            .filter_map(|member| self.crossings.get(&member.id));
        records.fold(None, |strongest, record| {
            match record.restraint(now, lead_ns) {
                Some(restraint) => Some(restraint.with(strongest)),
                None => strongest,
            }
        })
    }

    fn restrain(
        &self,
        member: &mut Member,
        restraint: Option<&Restraint>,
        now: HouseNs,
        lead_ns: i64,
    ) {
        if let (Some(restraint), Some(record)) = (restraint, self.crossings.get(&member.id)) {
            let judgement = std::mem::replace(&mut member.judgement, Judgement::Pending);
            let when = (now, seconds(lead_ns));
            member.judgement = record.restrained(judgement, restraint, when, &member.ends);
        }
    }

    /// Time to the next decision, which is not later than the floor between changes allows one.
    fn step_ns(&self, id: &Id, now: HouseNs, lead_ns: i64, ends: &Ends) -> i64 {
        let Some(record) = self.crossings.get(id) else {
            return i64::MAX;
        };
        let step_ns = (record.step_s(now, ends) * 1e9) as i64;
        let floor_ns = record.floor_ends_in_ns(now, lead_ns);
        floor_ns.map_or(step_ns, |floor_ns| step_ns.min(floor_ns))
    }

    /// Does what was judged.
    fn settle(
        &mut self,
        member: Member,
        now: HouseNs,
        effect_ns: HouseNs,
        effects: &mut Effects,
    ) -> Ends {
        let Member {
            id,
            ends,
            judgement,
        } = member;
        let stamp = Stamp {
            epoch: self.epoch,
            decided_ns: now,
            effect_ns,
        };
        let Some(record) = self.crossings.get_mut(&id) else {
            return ends;
        };
        let standing = match judgement {
            Judgement::Pending => return ends,
            Judgement::Stay(standing) => {
                let due = record.newest.as_ref().filter(|n| n.review_ns <= now);
                if let Some(due) = due.map(|newest| newest.setting(&id)) {
                    effects.settings.push(record.renew(&due, stamp, &ends));
                }
                standing
            }
            Judgement::Change { choice, reason } => {
                let standing = choice.standing.clone();
                effects
                    .settings
                    .push(record.issue(*choice, reason, stamp, &ends));
                standing
            }
        };
        effects.transitions.extend(record.stand(standing));
        ends
    }
}

impl crate::record::CrossingRecord {
    /// Takes a state with its reason; tells if it is another one.
    fn stand(&mut self, standing: Standing) -> Option<Transition> {
        let Standing {
            state: to,
            reason,
            needed,
        } = standing;
        let from = std::mem::replace(&mut self.state, to);
        self.needed = needed.map(Box::new);
        let is_plain = to == CrossingState::Holding && reason == self.holds();
        self.reason = (!is_plain).then(|| reason.as_str().into());
        let crossing = self.id().clone();
        (from != to).then_some(Transition::Crossing {
            crossing,
            from,
            to,
            reason,
        })
    }
}

fn seconds(ns: i64) -> f64 {
    ns as f64 * 1e-9
}
