//! A crossing as the engine keeps it.

use num_rational::Ratio;
use ratewright_ratio::Bounds;
use serde::{Deserialize, Serialize};

use crate::clocks::Traced;
use crate::ledger::Ledger;
use crate::newest::Newest;
use crate::policy::choose::{Choice, View, choose, choose_nominal};
use crate::policy::keep::may_stay;
use crate::policy::outlook::Outlook;
use crate::policy::standing::{Standing, holds};
use crate::policy::{TUBE, pitch_limit};
use crate::schedule::NEVER;
use crate::sink_count::SinkCount;
use crate::target::Target;
use crate::{
    ClockDeclaration, CrossingDeclaration, CrossingState, HouseNs, Id, Pin, Reason, Transition,
};

/// A phase error that would take longer than this to bring back, seconds, is not brought back:
/// the buffer has long slipped, and its follower has centred it.
const LONGEST_RECOVERY_S: f64 = 600.0;
/// Seconds between decisions until the clocks are locked, and afterwards.
const STEPS_S: (f64, f64) = (1.0, 10.0);
/// With less than this to go in the tube, seconds, a crossing is decided as often as before the
/// lock.
const SHORT_HOLD_S: f64 = 100.0;

/// A crossing with its account and its newest setting.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) struct CrossingRecord {
    pub(crate) declaration: CrossingDeclaration,
    pub(crate) ledger: Ledger,
    pub(crate) newest: Option<Newest>,
    pub(crate) last_number: u64,
    pub(crate) settings_made: u32,
    pub(crate) changes_made: u32,
    pub(crate) state: CrossingState,
    /// Why it is in that state, where the state does not say it all.
    pub(crate) reason: Option<Box<str>>,
    /// Smallest bounds that would do, while it is out of bounds.
    pub(crate) needed: Option<Box<Bounds>>,
    /// Who pinned it, if it is pinned.
    pub(crate) pin: Option<Box<Pin>>,
    /// The sink's count as its follower said it last.
    pub(crate) sink_count: Option<SinkCount>,
    /// True if the stream comes from the backup source.
    pub(crate) on_backup: bool,
    /// When what is run was changed last: the effect of that setting.
    pub(crate) changed_ns: HouseNs,
    /// When it is decided next, if it belongs to no group.
    pub(crate) due_ns: HouseNs,
    /// A reason to decide anew at the next opportunity.
    pub(crate) forced: Option<Reason>,
}

/// The two clocks of a crossing at an instant.
#[derive(Clone, Debug)]
pub(crate) struct Ends {
    pub(crate) source: Traced,
    pub(crate) sink: Traced,
    pub(crate) target: Target,
}

impl Ends {
    /// From the nominal rates, Hz, and the estimates of now.
    pub(crate) fn new(source: (Ratio<u64>, Traced), sink: (Ratio<u64>, Traced)) -> Self {
        let target = Target::new((source.0, &source.1), (sink.0, &sink.1));
        Ends {
            source: source.1,
            sink: sink.1,
            target,
        }
    }
}

/// What a look at a crossing says.
#[derive(Clone, Debug, PartialEq)]
pub(crate) enum Judgement {
    /// A setting is under way; there is nothing to decide.
    Pending,
    /// The setting in force stays.
    Stay(Standing),
    /// Another one is due.
    Change { choice: Box<Choice>, reason: Reason },
}

impl CrossingRecord {
    /// A crossing that waits for its first setting; numbers go on from `last_number`.
    pub(crate) fn new(
        declaration: CrossingDeclaration,
        source: &ClockDeclaration,
        sink: &ClockDeclaration,
        last_number: u64,
    ) -> Self {
        CrossingRecord {
            declaration,
            ledger: Ledger::new(source.hz(), sink.hz()),
            newest: None,
            last_number,
            settings_made: 0,
            changes_made: 0,
            state: CrossingState::Waiting,
            reason: Some("declared".into()),
            needed: None,
            pin: None,
            sink_count: None,
            on_backup: false,
            changed_ns: HouseNs::MIN,
            due_ns: NEVER,
            forced: Some(Reason::First),
        }
    }

    pub(crate) fn id(&self) -> &Id {
        &self.declaration.id
    }

    /// What is said of it if there is nothing else to say.
    pub(crate) fn holds(&self) -> String {
        holds(&self.declaration)
    }

    /// Why it is in its state.
    pub(crate) fn why(&self) -> String {
        self.reason
            .as_deref()
            .map_or_else(|| self.holds(), str::to_owned)
    }

    /// Clock of the source that the stream comes from.
    pub(crate) fn source(&self) -> &Id {
        let CrossingDeclaration { source, backup, .. } = &self.declaration;
        backup.as_ref().filter(|_| self.on_backup).unwrap_or(source)
    }

    /// Brings the account up to `now`; tells if it had to be begun anew.
    pub(crate) fn advance(&mut self, now: HouseNs, ends: &Ends) -> Option<Transition> {
        self.ledger.advance(now, &ends.source, &ends.sink);
        let pitch = pitch_limit(&self.declaration, ends.target.nominal_sink_hz);
        let recoverable = pitch * LONGEST_RECOVERY_S;
        let limit = self.declaration.headroom_samples + recoverable;
        let phase = self.ledger.phase_samples();
        if phase.abs() - 2.0 * self.ledger.variance().sqrt() <= limit {
            return None;
        }
        self.ledger.centre(now, 0.0, 0.0);
        Some(Transition::Centred {
            crossing: self.id().clone(),
            phase_error_samples: 0.0,
            reason: format!(
                "the phase error would be {phase:.0} samples: the buffer must have slipped, \
                 and counts as centred from now on"
            ),
        })
    }

    /// Seconds to the next decision.
    pub(crate) fn step_s(&self, now: HouseNs, ends: &Ends) -> f64 {
        use ratewright_timing::State::{Holdover, Locked};
        let settled = |clock: &Traced| matches!(clock.estimate.state, Locked | Holdover);
        match self.state {
            CrossingState::Waiting if ends.source.measured && ends.sink.measured => STEPS_S.0,
            CrossingState::Waiting => STEPS_S.1,
            CrossingState::Holding if ends.target.certain => STEPS_S.1,
            CrossingState::Holding if self.tube_lasts_s(now, ends) < SHORT_HOLD_S => STEPS_S.0,
            _ if settled(&ends.source) && settled(&ends.sink) => STEPS_S.1,
            _ => STEPS_S.0,
        }
    }

    /// Seconds until the phase error leaves the tube under the ratio in force, as it seems now.
    fn tube_lasts_s(&self, now: HouseNs, ends: &Ends) -> f64 {
        let Some(ratio) = self.ledger.timeline.ratio_at(now) else {
            return 0.0;
        };
        let velocity = self.ledger.velocity(ratio, &ends.source, &ends.sink);
        let way = TUBE * self.declaration.headroom_samples
            - velocity.signum() * self.ledger.phase_samples();
        way.max(0.0) / velocity.abs()
    }

    /// Looks at the crossing at `now`, to which its account is advanced. A setting would take
    /// effect `lead_s` seconds later.
    pub(crate) fn judge(&self, now: HouseNs, ends: &Ends, lead_s: f64) -> Judgement {
        let pending = self
            .ledger
            .timeline
            .last_effect_ns()
            .is_some_and(|effect| effect > now);
        if pending && self.forced.is_none() {
            return Judgement::Pending;
        }
        let outlook = self.outlook(ends);
        let view = self.view(now, &outlook, ends, lead_s);
        if !(ends.source.measured && ends.sink.measured) {
            return self.wait(&view, ends);
        }
        let doubt = self.doubt(ends);
        if self.forced.is_none() {
            if let Some(doubt) = doubt.clone().filter(|_| self.waits_to_be_heeded(now)) {
                return Judgement::Stay(doubt);
            }
            if let Some(standing) = self.stays(&view) {
                return Judgement::Stay(doubt.unwrap_or(standing));
            }
        }
        let mut choice = choose(&view);
        choice.standing = doubt.unwrap_or(choice.standing);
        self.change_to(choice)
    }

    /// Chooses anew whatever the setting in force is worth.
    pub(crate) fn choose_anew(&self, now: HouseNs, ends: &Ends, lead_s: f64) -> Choice {
        let outlook = self.outlook(ends);
        let view = self.view(now, &outlook, ends, lead_s);
        if ends.source.measured && ends.sink.measured {
            choose(&view)
        } else {
            choose_nominal(&view, self.waiting(ends))
        }
    }

    pub(crate) fn outlook<'a>(&self, ends: &'a Ends) -> Outlook<'a> {
        Outlook::new(&self.ledger, ends.target.clone(), &ends.source, &ends.sink)
    }

    pub(crate) fn view<'a>(
        &'a self,
        now: HouseNs,
        outlook: &'a Outlook<'a>,
        ends: &Ends,
        lead_s: f64,
    ) -> View<'a> {
        let in_force = self.ledger.timeline.ratio_at(now);
        View {
            outlook,
            declaration: &self.declaration,
            velocity: in_force.map_or(0.0, |ratio| outlook.velocity(ratio)),
            running_error: self.running_error(),
            lead_s,
            step_s: self.step_s(now, ends),
        }
    }

    /// Until both clocks are measured the nominal ratio runs.
    fn wait(&self, view: &View<'_>, ends: &Ends) -> Judgement {
        let standing = self.waiting(ends);
        if self.forced.is_none() {
            return Judgement::Stay(standing);
        }
        self.change_to(choose_nominal(view, standing))
    }

    /// What the running error of the newest setting may be off by, samples.
    pub(crate) fn running_error(&self) -> f64 {
        let newest = self.newest.as_ref();
        newest.map_or(0.0, Newest::error)
    }

    /// The state in which the setting in force may stay, if it may.
    fn stays(&self, view: &View<'_>) -> Option<Standing> {
        let newest = self.newest.as_ref()?;
        let error = view.running_error;
        let limits = view.limits(error);
        let block_s =
            newest.block_inputs() as f64 * view.outlook.target.value / view.outlook.sink_hz;
        let until_s = view.step_s + view.lead_s + block_s;
        if may_stay(view.outlook, &limits, view.velocity, until_s) {
            return Some(view.standing(view.velocity, error));
        }
        view.is_as_good(error)
            .then(|| view.standing(view.velocity, error))
    }

    fn change_to(&self, choice: Choice) -> Judgement {
        if let Some(reason) = self.forced {
            return Judgement::Change {
                choice: Box::new(choice),
                reason,
            };
        }
        if self
            .newest
            .as_ref()
            .is_some_and(|newest| newest.realised() == choice.way.realised)
        {
            return Judgement::Stay(choice.standing);
        }
        let reason = if choice.recovers {
            Reason::Recovery
        } else {
            Reason::Evidence
        };
        Judgement::Change {
            choice: Box::new(choice),
            reason,
        }
    }

    fn waiting(&self, ends: &Ends) -> Standing {
        let (id, role) = if ends.source.measured {
            (&self.declaration.sink, "sink")
        } else {
            (self.source(), "source")
        };
        let reason = format!("the {role} {id} was never measured");
        Standing::new(CrossingState::Waiting, reason)
    }
}
