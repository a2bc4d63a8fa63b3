//! The sample facility through the engine for a simulated day: what a reader of the page would hope for.

use ratewright_control::{
    CrossingDeclaration, Effects, Engine, Event, HouseNs, Id, Refusal, Setting, Transition,
};
use ratewright_rehearsal::{Facility, Occasion, TruePhase, declare, rehearse, sample};
use ratewright_timing::{Event as Noticed, Outcome, State};

const S: HouseNs = 1_000_000_000;
const ORIGIN_NS: HouseNs = 1_800_000_000 * S;
const DAY_S: i64 = 86_400;

/// What happened.
#[derive(Default)]
struct Diary {
    refusals: Vec<Refusal>,
    clocks: Vec<(HouseNs, Id, State)>,
    noticed: Vec<(HouseNs, Id, Noticed)>,
    settings: Vec<Setting>,
}

impl Diary {
    fn note(&mut self, occasion: &Occasion<'_>) {
        match occasion.result {
            Ok(effects) => self.note_effects(occasion, effects),
            Err(refusal) => self.refusals.push(refusal.clone()),
        }
    }

    fn note_effects(&mut self, occasion: &Occasion<'_>, effects: &Effects) {
        self.settings.extend(effects.settings.iter().cloned());
        for transition in &effects.transitions {
            if let Transition::Clock { clock, to, .. } = transition {
                self.clocks.push((occasion.now_ns, clock.clone(), *to));
            }
        }
        if let (Event::Reading(reading), Some(Outcome::Event(event))) =
            (occasion.event, effects.outcome)
        {
            self.noticed
                .push((occasion.now_ns, reading.clock.clone(), event));
        }
    }

    /// When a clock first entered a state after `since_ns`; both since the origin.
    fn entered(&self, clock: &Id, state: State, since_ns: HouseNs) -> Option<HouseNs> {
        let entries = self
            .clocks
            .iter()
            .filter(|(_, id, to)| id == clock && *to == state);
        entries
            .map(|(at_ns, ..)| at_ns - ORIGIN_NS)
            .find(|&at_ns| at_ns > since_ns)
    }
}

/// The settings of a crossing put in force at their effect instants.
struct Judge {
    phase: TruePhase,
    to_come: Vec<(HouseNs, f64)>,
}

impl Judge {
    fn new(facility: &Facility, crossing: &CrossingDeclaration, settings: &[Setting]) -> Self {
        let ratio = |setting: &Setting| {
            let average = setting.average();
            *average.numer() as f64 / *average.denom() as f64
        };
        let mut of_crossing = settings
            .iter()
            .filter(|setting| setting.crossing == crossing.id);
        let first = of_crossing
            .next()
            .expect("a crossing has a setting once it is declared");
        let phase = TruePhase::new(facility, crossing, ratio(first)).unwrap();
        let mut to_come: Vec<_> = of_crossing.map(|s| (s.effect_ns, ratio(s))).collect();
        to_come.reverse();
        Self { phase, to_come }
    }

    fn at(&mut self, house_ns: HouseNs) -> f64 {
        while let Some(&(effect_ns, ratio)) = self.to_come.last() {
            if effect_ns > house_ns {
                break;
            }
            self.phase.put_in_force(ratio, effect_ns);
            self.to_come.pop();
        }
        self.phase.at(house_ns)
    }
}

#[test]
fn a_day_at_radio_lanternsea() {
    let mut facility = Facility::new(sample::plan(), sample::SEED, ORIGIN_NS).unwrap();
    let mut engine = Engine::new(1);
    let mut diary = Diary::default();
    declare(&mut engine, &facility, |_, occasion| diary.note(&occasion));
    let mut step = |engine: &mut Engine, diary: &mut Diary, until_s: i64| {
        rehearse(
            engine,
            &mut facility,
            ORIGIN_NS + until_s * S,
            |_, occasion| {
                diary.note(&occasion);
            },
        );
    };
    step(&mut engine, &mut diary, 60);
    everything_is_measured_within_a_minute(&engine);
    step(&mut engine, &mut diary, DAY_S);
    assert_eq!(diary.refusals, []);
    every_clock_locks(&engine, &diary);
    the_outage_shows(&diary);
    the_gramophone_is_noticed(&diary);
    nothing_slips(&facility, &engine, &diary);
}

fn everything_is_measured_within_a_minute(engine: &Engine) {
    let now = ORIGIN_NS + 60 * S;
    for clock in engine.clocks() {
        let state = engine.estimate(&clock.id, now).unwrap().estimate.state;
        assert_ne!(state, State::FreeRunning, "{}", clock.id);
    }
    for crossing in engine.crossings() {
        assert!(
            engine.status(&crossing.id, now).unwrap().setting.is_some(),
            "{}",
            crossing.id
        );
    }
}

/// Within ten minutes of the start, and for good except where something fails.
fn every_clock_locks(engine: &Engine, diary: &Diary) {
    for clock in engine.clocks().filter(|clock| !clock.exact) {
        let locked = diary
            .entered(&clock.id, State::Locked, 0)
            .expect("every clock locks");
        assert!(
            locked < 600 * S,
            "{} locked after {} s",
            clock.id,
            locked / S
        );
    }
}

/// The ferry's clocks, and no others, lose their readings, and lock again when they return.
fn the_outage_shows(diary: &Diary) {
    let outage = sample::FERRY_OUTAGE;
    for name in ["host-ferry", "ferry-desk", "ferry-talkback"] {
        let id = Id::new(name).unwrap();
        let lost = diary
            .entered(&id, State::Holdover, 0)
            .expect("the outage is noticed");
        assert!(
            (outage.from_ns..outage.to_ns).contains(&lost),
            "{name} after {} s",
            lost / S
        );
        let back = diary
            .entered(&id, State::Locked, lost)
            .expect("it locks again");
        assert!(back >= outage.to_ns, "{name} after {} s", back / S);
    }
    let others = diary
        .clocks
        .iter()
        .filter(|(_, id, to)| *to == State::Holdover && !id.as_str().contains("ferry"));
    assert_eq!(others.count(), 0);
}

/// The gramophone steps, nothing else does anything of the kind, and it takes less than a minute to see.
fn the_gramophone_is_noticed(diary: &Diary) {
    let [(at_ns, id, event)] = &diary.noticed[..] else {
        panic!("one event was expected: {:?}", diary.noticed);
    };
    assert_eq!((id.as_str(), event), ("gramophone", &Noticed::PhaseStep));
    let after_ns = at_ns - ORIGIN_NS - sample::GRAMOPHONE_STEP_AT_NS;
    assert!(
        (0..60 * S).contains(&after_ns),
        "noticed after {} s",
        after_ns / S
    );
}

/// Once both clocks of a crossing are locked its true phase error stays in the headroom, and the
/// engine's account of it is right to a twentieth of that. (The samples that the gramophone lost are
/// lost whatever the ratio: they are put back before judging.)
fn nothing_slips(facility: &Facility, engine: &Engine, diary: &Diary) {
    for crossing in &facility.plan().crossings {
        let locked = |id: &Id| diary.entered(id, State::Locked, 0).unwrap_or(0);
        let from_s = locked(&crossing.source).max(locked(&crossing.sink)) / S + 1;
        let mut judge = Judge::new(facility, crossing, &diary.settings);
        let mut phase = 0.0;
        for at_s in (from_s..=DAY_S).step_by(5) {
            phase = judge.at(ORIGIN_NS + at_s * S);
            let (id, headroom) = (&crossing.id, crossing.headroom_samples);
            assert!(
                phase.abs() <= headroom,
                "{id} slipped after {at_s} s: {phase} of ±{headroom}"
            );
        }
        let status = engine.status(&crossing.id, ORIGIN_NS + DAY_S * S).unwrap();
        let error = status.phase_error_samples - phase;
        let id = &crossing.id;
        assert!(
            error.abs() <= 0.05 * crossing.headroom_samples,
            "{id}: account off by {error}"
        );
    }
}
