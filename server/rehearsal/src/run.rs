//! A facility with its followers, played to the engine from its first nanosecond to its last.

use ratewright_control::{Effects, Engine, Event, HouseNs, Refusal, Transition};
use ratewright_timing::State;
use thiserror::Error;

use crate::{
    dice::Dice,
    facility::{Facility, TrueClock},
    plan::{Plan, PlanError},
    played::PlayedCrossing,
    report::{ClockReport, Report},
    tally::Tenure,
};

/// House time at which every rehearsal begins, ns.
const ORIGIN_NS: HouseNs = 1_800_000_000_000_000_000;
/// The readings of this much house time are made at once, ns.
const STRIDE_NS: i64 = 10_000_000_000;
/// Time between looks at phase errors and drifts, ns.
const LOOK_NS: i64 = 10_000_000_000;

/// Why a rehearsal cannot begin.
#[derive(Clone, Debug, PartialEq, Eq, Error)]
pub enum RunError {
    /// The plan cannot be.
    #[error("{0}")]
    Plan(#[from] PlanError),
    /// The engine refused a declaration.
    #[error("{0}")]
    Declaration(#[from] Refusal),
}

/// A rehearsal under way.
///
/// **Order of use.** [`Run::new`], [`Run::until`] in as many steps as you like, [`Run::report`]. The steps
/// change nothing: the same plan and seed give the same report.
///
/// ```
/// use ratewright_rehearsal::{Run, sample};
/// let mut run = Run::new(sample::plan(), 7)?;
/// run.until(120.0);
/// let report = run.report();
/// assert_eq!(report.crossings.len(), sample::plan().crossings.len());
/// # Ok::<(), ratewright_rehearsal::RunError>(())
/// ```
pub struct Run {
    seed: u64,
    engine: Engine,
    facility: Facility,
    crossings: Vec<PlayedCrossing>,
    clocks: Vec<PlayedClock>,
    now_ns: HouseNs,
    next_look_ns: HouseNs,
    readings: u64,
    refused: u64,
    first_refusal: Option<String>,
}

/// A clock while it is played.
struct PlayedClock {
    truth: TrueClock,
    looks: u64,
    hits: u64,
    report: ClockReport,
}

impl std::fmt::Debug for Run {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        f.debug_struct("Run")
            .field("seed", &self.seed)
            .field("now_ns", &self.now_ns)
            .finish_non_exhaustive()
    }
}

impl Run {
    /// A plan at its beginning.
    ///
    /// # Errors
    /// [`RunError`] if the plan cannot be, or the engine refuses what it declares.
    pub fn new(plan: Plan, seed: u64) -> Result<Self, RunError> {
        Self::begin(plan, seed, false)
    }

    /// As [`Run::new`], and the report has the course of every crossing.
    ///
    /// # Errors
    /// As [`Run::new`].
    pub fn traced(plan: Plan, seed: u64) -> Result<Self, RunError> {
        Self::begin(plan, seed, true)
    }

    fn begin(plan: Plan, seed: u64, traced: bool) -> Result<Self, RunError> {
        let facility = Facility::new(plan, seed, ORIGIN_NS)?;
        let mut run = Self {
            seed,
            engine: Engine::new(1),
            crossings: crossings(&facility, Dice::new(seed), traced),
            clocks: clocks(&facility),
            facility,
            now_ns: ORIGIN_NS,
            next_look_ns: ORIGIN_NS,
            readings: 0,
            refused: 0,
            first_refusal: None,
        };
        let declarations: Vec<_> = run.facility.declarations().collect();
        for declaration in &declarations {
            let effects = run.engine.apply(declaration, ORIGIN_NS)?;
            run.take(&effects);
        }
        Ok(run)
    }

    /// Plays on until `at_s` seconds after the beginning.
    pub fn until(&mut self, at_s: f64) {
        let end_ns = ORIGIN_NS + libm::round(at_s * 1e9) as i64;
        while self.now_ns < end_ns {
            let stride_ns = end_ns.min(self.now_ns + STRIDE_NS);
            for delivered in self.facility.until(stride_ns) {
                self.pass_to(delivered.at_ns);
                self.readings += 1;
                self.apply(&Event::Reading(delivered.reading));
            }
            self.pass_to(stride_ns);
        }
    }

    /// How it went, up to here.
    pub fn report(self) -> Report {
        let end_ns = self.now_ns;
        let crossings = self
            .crossings
            .into_iter()
            .map(|crossing| crossing.report(end_ns));
        let clocks = self.clocks.into_iter().map(|clock| clock.report(end_ns));
        Report {
            seed: self.seed,
            length_s: (end_ns - ORIGIN_NS) as f64 * 1e-9,
            readings: self.readings,
            refused: self.refused,
            first_refusal: self.first_refusal,
            crossings: crossings.collect(),
            clocks: clocks.collect(),
        }
    }

    /// Lets time pass up to `until_ns`: timers, followers and looks, in order.
    fn pass_to(&mut self, until_ns: HouseNs) {
        loop {
            let follower = self.crossings.iter().enumerate();
            let follower = follower
                .filter_map(|(i, crossing)| Some((crossing.next_due()?, i)))
                .min();
            let follower_ns = follower.map_or(HouseNs::MAX, |(at_ns, _)| at_ns);
            let timer_ns = self.engine.next_due().unwrap_or(HouseNs::MAX);
            let next_ns = follower_ns.min(timer_ns).min(self.next_look_ns);
            if next_ns > until_ns {
                break;
            }
            self.now_ns = self.now_ns.max(next_ns);
            match follower {
                Some((at_ns, i)) if at_ns == next_ns => self.act(i),
                _ if timer_ns == next_ns => self.apply(&Event::Tick),
                _ => self.look(),
            }
        }
        self.now_ns = until_ns;
    }

    fn act(&mut self, i: usize) {
        let reports = self.crossings[i].act(&self.facility, self.now_ns);
        self.look_at_crossing(i);
        for report in reports {
            self.apply(&report);
        }
    }

    fn look(&mut self) {
        self.next_look_ns += LOOK_NS;
        for i in 0..self.crossings.len() {
            self.look_at_crossing(i);
        }
        for clock in &mut self.clocks {
            clock.look(&self.engine, self.now_ns);
        }
    }

    fn look_at_crossing(&mut self, i: usize) {
        let id = &self.crossings[i].declaration.id;
        let believed = self
            .engine
            .status(id, self.now_ns)
            .map(|status| status.phase_error_samples);
        self.crossings[i].look(believed.unwrap_or_default(), self.now_ns);
    }

    fn apply(&mut self, event: &Event) {
        match self.engine.apply(event, self.now_ns) {
            Ok(effects) => self.take(&effects),
            Err(refusal) => {
                self.refused += 1;
                self.first_refusal
                    .get_or_insert_with(|| refusal.to_string());
            }
        }
    }

    fn take(&mut self, effects: &Effects) {
        for setting in &effects.settings {
            let of = self
                .crossings
                .iter_mut()
                .find(|c| c.declaration.id == setting.crossing);
            if let Some(crossing) = of {
                crossing.hear(setting, self.now_ns);
            }
        }
        for transition in &effects.transitions {
            match transition {
                Transition::Crossing { crossing, to, .. } => {
                    let found = self
                        .crossings
                        .iter_mut()
                        .find(|c| c.declaration.id == *crossing);
                    if let Some(crossing) = found {
                        crossing.enter(*to, self.now_ns);
                    }
                }
                Transition::Clock { clock, to, .. } => {
                    if let Some(clock) = self.clocks.iter_mut().find(|c| c.report.clock == *clock) {
                        clock.enter(*to, self.now_ns);
                    }
                }
                _ => {}
            }
        }
    }
}

fn crossings(facility: &Facility, dice: Dice, traced: bool) -> Vec<PlayedCrossing> {
    let declared = facility.plan().crossings.iter().cloned();
    // A crossing without its clocks is refused by the engine right after.
    declared
        .filter_map(|crossing| PlayedCrossing::new(facility, crossing, dice, traced))
        .collect()
}

fn clocks(facility: &Facility) -> Vec<PlayedClock> {
    let measured = facility.plan().clocks().filter(|clock| !clock.exact);
    let played = measured.filter_map(|clock| {
        Some(PlayedClock {
            truth: facility.true_clock(&clock.id)?,
            looks: 0,
            hits: 0,
            report: ClockReport {
                clock: clock.id.clone(),
                coverage: None,
                locked_after_s: None,
                states: Tenure::new(State::FreeRunning, facility.origin_ns()),
            },
        })
    });
    played.collect()
}

impl PlayedClock {
    fn enter(&mut self, state: State, now_ns: HouseNs) {
        self.report.states.enter(state, now_ns);
        if state == State::Locked {
            let after_s = (now_ns - ORIGIN_NS) as f64 * 1e-9;
            self.report.locked_after_s.get_or_insert(after_s);
        }
    }

    fn look(&mut self, engine: &Engine, now_ns: HouseNs) {
        let Some(known) = engine.estimate(&self.report.clock, now_ns) else {
            return;
        };
        if known.measured {
            let truth = self.truth.at(now_ns).drift;
            self.looks += 1;
            self.hits += u64::from((known.estimate.low..=known.estimate.high).contains(&truth));
        }
    }

    fn report(mut self, end_ns: HouseNs) -> ClockReport {
        self.report.states.enter(State::FreeRunning, end_ns);
        self.report.coverage = (self.looks > 0).then(|| self.hits as f64 / self.looks as f64);
        self.report
    }
}
