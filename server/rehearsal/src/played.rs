//! A crossing while it is played: its follower, what truly runs, and what becomes of it.

use std::collections::VecDeque;

use ratewright_control::{CrossingDeclaration, CrossingState, Event, HouseNs, Realised, Setting};

use crate::{
    dice::Dice,
    facility::{Facility, TrueClock},
    follower::Follower,
    phase::TruePhase,
    report::{CrossingReport, Trace, TracePoint},
    tally::{Excursions, Tenure},
};

/// A setting on its way: at the block end it takes effect.
#[derive(Clone, Debug)]
struct Coming {
    at_ns: HouseNs,
    sink_sample: u64,
    setting: Setting,
}

pub(crate) struct PlayedCrossing {
    pub(crate) declaration: CrossingDeclaration,
    follower: Follower,
    dice: Dice,
    origin_ns: HouseNs,
    sink: TrueClock,
    /// What runs; none before the first setting took effect.
    phase: Option<TruePhase>,
    own_error: f64,
    coming: VecDeque<Coming>,
    next_level: u64,
    settings: u64,
    wanted: Option<ratewright_ratio::Fraction>,
    changes: u64,
    truth: Excursions,
    worst_believed: f64,
    states: Tenure<CrossingState>,
    trace: Option<Trace>,
}

impl PlayedCrossing {
    /// The crossing at the facility's origin; `None` if the plan lacks its sink.
    pub(crate) fn new(
        facility: &Facility,
        declaration: CrossingDeclaration,
        dice: Dice,
        traced: bool,
    ) -> Option<Self> {
        let followers = &facility.plan().followers;
        let follower = followers
            .iter()
            .find(|follower| follower.crossing == declaration.id);
        Some(Self {
            follower: follower
                .cloned()
                .unwrap_or_else(|| Follower::silent(declaration.id.clone())),
            dice: dice.named("follower").named(declaration.id.as_str()),
            origin_ns: facility.origin_ns(),
            sink: facility.true_clock(&declaration.sink)?,
            phase: None,
            own_error: 0.0,
            coming: VecDeque::new(),
            next_level: 1,
            settings: 0,
            wanted: None,
            changes: 0,
            truth: Excursions::default(),
            worst_believed: 0.0,
            states: Tenure::new(CrossingState::Waiting, facility.origin_ns()),
            trace: traced.then(Trace::default),
            declaration,
        })
    }

    /// The engine has decided.
    pub(crate) fn hear(&mut self, setting: &Setting, now_ns: HouseNs) {
        self.settings += 1;
        if self
            .wanted
            .replace(setting.wanted)
            .is_some_and(|before| before != setting.wanted)
        {
            self.changes += 1;
            if let Some(trace) = &mut self.trace {
                trace
                    .changes_s
                    .push((setting.effect_ns - self.origin_ns) as f64 * 1e-9);
            }
        }
        let heard_ns = now_ns + self.follower.delivery_ns;
        let due_ns = setting.effect_ns.max(heard_ns) - self.origin_ns;
        let free_ns = self.follower.free_from(due_ns);
        // A follower that is stuck for ever never comes to it.
        let Some(free_ns) = free_ns
            .checked_add(self.origin_ns)
            .filter(|_| free_ns < i64::MAX / 2)
        else {
            return;
        };
        let (at_ns, sink_sample) = self.sink.block_end(free_ns, self.follower.block_samples);
        self.coming.push_back(Coming {
            at_ns,
            sink_sample,
            setting: setting.clone(),
        });
    }

    pub(crate) fn enter(&mut self, state: CrossingState, now_ns: HouseNs) {
        self.states.enter(state, now_ns);
    }

    /// When the follower does something next.
    pub(crate) fn next_due(&self) -> Option<HouseNs> {
        let effect = self.coming.front().map(|coming| coming.at_ns);
        [effect, self.level_due()].into_iter().flatten().min()
    }

    fn level_due(&self) -> Option<HouseNs> {
        let levels = self.follower.levels?;
        Some(self.origin_ns + levels.every_ns * self.next_level as i64)
    }

    /// Does what is due at `now_ns`, and says what the follower reports.
    pub(crate) fn act(&mut self, facility: &Facility, now_ns: HouseNs) -> Vec<Event> {
        let mut reports = Vec::new();
        let mut latest = None;
        while self
            .coming
            .front()
            .is_some_and(|coming| coming.at_ns <= now_ns)
        {
            latest = self.coming.pop_front();
        }
        if let Some(coming) = latest {
            self.run(facility, &coming);
            if self.follower.says_applied {
                reports.push(applied(&coming));
            }
        }
        if self.level_due().is_some_and(|due_ns| due_ns <= now_ns) {
            reports.extend(self.level(now_ns));
            self.next_level += 1;
        }
        reports
    }

    fn run(&mut self, facility: &Facility, coming: &Coming) {
        let ratio = average(&coming.setting);
        match &mut self.phase {
            Some(phase) => phase.put_in_force(ratio, coming.at_ns),
            None => {
                self.phase = TruePhase::starting(facility, &self.declaration, ratio, coming.at_ns);
            }
        }
        self.own_error = own_error(&coming.setting.realised);
    }

    fn level(&mut self, now_ns: HouseNs) -> Option<Event> {
        let deviation_samples = self.follower.levels?.deviation_samples;
        let error = deviation_samples * self.dice.normal(self.next_level);
        Some(Event::Occupancy {
            crossing: self.declaration.id.clone(),
            level_samples: self.phase.as_mut()?.at(now_ns) + error,
            deviation_samples,
            house_ns: now_ns,
        })
    }

    /// Looks at the phase error: the true one, and what the engine has.
    pub(crate) fn look(&mut self, believed: f64, now_ns: HouseNs) {
        let Some(phase) = &mut self.phase else { return };
        let truth = phase.at(now_ns);
        let magnitude = truth.abs() + self.own_error;
        self.truth
            .note(magnitude, self.declaration.headroom_samples, now_ns);
        self.worst_believed = self.worst_believed.max(believed.abs());
        if let Some(trace) = &mut self.trace {
            let at_s = (now_ns - self.origin_ns) as f64 * 1e-9;
            trace.phase.push(TracePoint {
                at_s,
                truth,
                believed,
            });
        }
    }

    pub(crate) fn report(mut self, end_ns: HouseNs) -> CrossingReport {
        self.states.enter(CrossingState::Waiting, end_ns);
        let first_slip_s = self
            .truth
            .first_ns
            .map(|at_ns| (at_ns - self.origin_ns) as f64 * 1e-9);
        CrossingReport {
            crossing: self.declaration.id,
            headroom_samples: self.declaration.headroom_samples,
            settings: self.settings,
            changes: self.changes,
            worst_samples: self.truth.worst,
            worst_believed_samples: self.worst_believed,
            slips: self.truth.slips,
            first_slip_s,
            states: self.states,
            trace: self.trace.unwrap_or_default(),
        }
    }
}

fn applied(coming: &Coming) -> Event {
    Event::Applied {
        crossing: coming.setting.crossing.clone(),
        epoch: coming.setting.epoch,
        number: coming.setting.number,
        house_ns: coming.at_ns,
        sink_sample: coming.sink_sample,
    }
}

fn average(setting: &Setting) -> f64 {
    let average = setting.average();
    *average.numer() as f64 / *average.denom() as f64
}

/// What a realisation adds to the phase error at most, sink samples.
fn own_error(realised: &Realised) -> f64 {
    let bound = match realised {
        Realised::Single(_) => return 0.0,
        Realised::Lazy { swing_samples, .. } => return *swing_samples,
        Realised::Cadence(cadence) => cadence.error_bound(),
        Realised::Stepping(stepping) => stepping.error_bound(),
    };
    *bound.numer() as f64 / *bound.denom() as f64
}
