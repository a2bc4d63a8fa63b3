//! A group on its way: what its commands did, until it is on the disk.

use ratewright_control::{Act, Engine, Event, HouseNs, Refusal, Setting, Transition, explain};
use tokio::sync::oneshot;

use super::{Command, Done, Promise, news::Touched};
use crate::{
    chronicle::{Happening, What},
    metrics,
    refused::Refused,
    store,
};

/// Events that one group holds, about: the group is closed by the command that reaches it.
const FULL: usize = 8_192;

/// What a group has gathered.
#[derive(Debug, Default)]
pub(super) struct Group {
    pub(super) written: store::Group,
    pub(super) touched: Touched,
    /// Changes of state, for the board.
    pub(super) happenings: Vec<Happening>,
    answers: Vec<(oneshot::Sender<Result<Done, Refused>>, Done)>,
}

impl Group {
    pub(super) fn is_full(&self) -> bool {
        self.written.len() >= FULL
    }

    /// Applies a command. One that asked for no more than that is answered here.
    pub(super) fn take(&mut self, engine: &mut Engine, command: Command, now: HouseNs) {
        let Command {
            decide,
            promise,
            answer,
        } = command;
        let events = match decide(engine) {
            Ok(events) => events,
            Err(refused) => {
                // A caller that has gone does not need its answer; here and below.
                let _ = answer.send(Err(refused));
                return;
            }
        };
        let done = Done {
            events: events.len(),
            refused: self.apply(engine, events, now),
            house_ns: now,
        };
        match promise {
            Promise::Applied => drop(answer.send(Ok(done))),
            Promise::Durable => self.answers.push((answer, done)),
        }
    }

    /// Applies events, and keeps them and what came out for the store. Gives those that were refused, by
    /// their place, each with why.
    pub(super) fn apply(
        &mut self,
        engine: &mut Engine,
        mut events: Vec<Event>,
        now: HouseNs,
    ) -> Vec<(usize, Refusal)> {
        let mut refused = Vec::new();
        let mut place = 0;
        events.retain(|event| {
            let taken = self.apply_one(engine, event, now);
            let is_taken = taken.is_ok();
            refused.extend(taken.err().map(|refusal| (place, refusal)));
            place += 1;
            is_taken
        });
        if !events.is_empty() {
            self.written.events.push((now, events));
        }
        refused
    }

    fn apply_one(
        &mut self,
        engine: &mut Engine,
        event: &Event,
        now: HouseNs,
    ) -> Result<(), Refusal> {
        let effects = engine.apply(event, now)?;
        self.touched.note(engine, event, &effects);
        effects.transitions.iter().for_each(log_transition);
        let happened = effects.transitions.into_iter().map(|transition| Happening {
            at_ns: now,
            what: What::Transition(transition),
        });
        self.happenings.extend(happened);
        for setting in &effects.settings {
            let explanation = explained(engine, setting);
            self.written.settings.push((setting.clone(), explanation));
        }
        effects.acts.iter().for_each(log_act);
        let done = effects.acts.iter().map(|act| Happening {
            at_ns: act.at_ns,
            what: What::Act(act.clone()),
        });
        self.happenings.extend(done);
        self.written.acts.extend(effects.acts);
        Ok(())
    }

    /// Answers the commands that waited for the disk. Call after the news is on the board.
    pub(super) fn answer(self) {
        for (answer, done) in self.answers {
            let _ = answer.send(Ok(done));
        }
    }
}

fn explained(engine: &Engine, setting: &Setting) -> Vec<String> {
    let crossing = engine.crossing(&setting.crossing);
    crossing.map_or_else(Vec::new, |crossing| explain(setting, crossing))
}

fn log_act(act: &Act) {
    let Act {
        crossing,
        by,
        note,
        what,
        ..
    } = act;
    tracing::info!(%crossing, by, note, ?what, "an operator acted");
}

fn log_transition(transition: &Transition) {
    metrics::transition(transition);
    match transition {
        Transition::Clock {
            clock,
            from,
            to,
            reason,
        } => {
            tracing::info!(%clock, ?from, ?to, ?reason, "clock changed its state");
        }
        Transition::ClockFault {
            clock,
            fault: Some(fault),
        } => tracing::warn!(%clock, %fault, "clock is at fault"),
        Transition::ClockFault { clock, fault: None } => {
            tracing::info!(%clock, "the fault of the clock is gone");
        }
        Transition::Crossing {
            crossing,
            from,
            to,
            reason,
        } => {
            tracing::info!(%crossing, ?from, ?to, reason, "crossing changed its state");
        }
        Transition::Centred {
            crossing,
            phase_error_samples,
            reason,
        } => {
            tracing::info!(%crossing, phase_error_samples, reason, "crossing was centred anew");
        }
    }
}
