//! A clock that is known in two ways which do not agree, and what else is declared of clocks.

mod world;

use num_rational::Ratio;
use ratewright_control::{
    ClockDeclaration, ClockEstimate, ClockFault, CrossingDeclaration, Effects, Engine, Event,
    Reading, Reference, Transition,
};
use ratewright_timing::sim::{Clock, Delay, Path, PathModel, probe};
use ratewright_timing::{LatencyTail, Measurement, Oscillator, State};
use world::{HOUR, SECOND, crossing, crystal, exact_clock, id};

const RATE: Ratio<u64> = Ratio::new_raw(48_000, 1);

/// A camera whose samples are counted each second as they come in; every five seconds a sender
/// report comes with a timestamp.
struct Camera {
    engine: Engine,
    samples: (Clock, Path),
    timestamps: (Clock, Path),
    now: i64,
    transitions: Vec<(i64, Transition)>,
}

impl Camera {
    fn new(samples_drift: f64, timestamps: Clock) -> Self {
        let path = |deviation_s, seed| {
            let delay = Delay::Gamma {
                shape: 2.0,
                scale_s: deviation_s,
                deviation_s,
            };
            Path::new(PathModel::new(delay), seed)
        };
        let mut camera = Camera {
            engine: Engine::new(1),
            samples: (samples(samples_drift), path(10e-6, 5)),
            timestamps: (timestamps, path(100e-6, 6)),
            now: 0,
            transitions: Vec::new(),
        };
        camera.apply(Event::DeclareClock(exact_clock("house", 48_000)));
        let rate = Ratio::from_integer(48_000);
        camera.apply(Event::DeclareClock(ClockDeclaration::new(id("cam"), rate)));
        camera.apply(Event::DeclareCrossing(crossing("x", "cam", "house")));
        camera
    }

    fn apply(&mut self, event: Event) -> Effects {
        let effects = self.engine.apply(&event, self.now).expect("a good event");
        for transition in &effects.transitions {
            self.transitions.push((self.now, transition.clone()));
        }
        effects
    }

    fn run_until(&mut self, end_ns: i64) {
        while self.now < end_ns {
            self.now += SECOND;
            let (clock, path) = &mut self.samples;
            let count = probe::counter(clock, path, RATE, 32, self.now).expect("nothing is lost");
            self.read("rack", count);
            if self.now % (5 * SECOND) == 0 {
                let (clock, path) = &mut self.timestamps;
                let report = probe::sender_report(clock, path, RATE, 32, self.now);
                self.read("stream", report.expect("nothing is lost"));
            }
        }
    }

    fn read(&mut self, probe: &str, measurement: Measurement) {
        self.apply(Event::Reading(Reading {
            clock: id("cam"),
            reference: Reference::House,
            probe: probe.to_owned(),
            sequence: 0,
            measurement,
        }));
    }

    fn estimate(&self) -> ClockEstimate {
        self.engine
            .estimate(&id("cam"), self.now)
            .expect("it was declared")
    }

    fn faults(&self) -> Vec<(i64, Option<ClockFault>)> {
        let faults = self.transitions.iter().filter_map(|(at, transition)| {
            let Transition::ClockFault { fault, .. } = transition else {
                return None;
            };
            Some((*at, *fault))
        });
        faults.collect()
    }
}

fn samples(drift: f64) -> Clock {
    Clock::new(crystal(drift, 1e-10), 1)
}

#[test]
fn timestamps_of_another_clock_are_named_and_the_samples_count() {
    let mut camera = Camera::new(8e-6, Clock::new(crystal(40e-6, 1e-10), 2));
    camera.run_until(HOUR);
    let faults = camera.faults();
    let [(at, Some(fault))] = faults[..] else {
        panic!("one fault, found once: {faults:?}")
    };
    assert!(at < HOUR / 2, "found after {} s", at / SECOND);
    let ClockFault::ForeignTimestamps {
        timestamps,
        samples,
        ..
    } = fault
    else {
        panic!("{fault}")
    };
    assert!((timestamps - 40e-6).abs() < 10e-6 && (samples - 8e-6).abs() < 3e-6);
    let said = fault.to_string();
    assert!(
        said.starts_with("its timestamps come from another clock than its samples"),
        "{said}"
    );
    let estimate = camera.estimate();
    assert!(estimate.fault.is_some());
    assert_eq!(estimate.probe.as_deref(), Some("rack"));
    assert!((estimate.estimate.drift - 8e-6).abs() < 0.5e-6);
    // The samples stay in charge when only timestamps come in.
    let silent_from = camera.now;
    while camera.now < silent_from + HOUR / 2 {
        camera.now += 5 * SECOND;
        let (clock, path) = &mut camera.timestamps;
        let report = probe::sender_report(clock, path, RATE, 32, camera.now);
        camera.read("stream", report.expect("nothing is lost"));
    }
    let estimate = camera.estimate();
    assert_eq!(estimate.probe.as_deref(), Some("rack"));
    assert_eq!(estimate.estimate.state, State::Holdover);
    assert!(estimate.fault.is_some(), "it was never seen to be cured");
}

#[test]
fn timestamps_of_the_samples_own_clock_are_no_fault() {
    let mut camera = Camera::new(8e-6, samples(8e-6));
    camera.run_until(2 * HOUR);
    assert_eq!(camera.faults(), []);
    assert_eq!(camera.estimate().estimate.state, State::Locked);
}

/// Applies every setting at its effect and says so with this count of the sink at that time.
fn follow(camera: &mut Camera, until_ns: i64, count: impl Fn(i64) -> u64) -> Vec<Transition> {
    let mut said = Vec::new();
    let mut number = 0;
    while camera.now < until_ns {
        camera.run_until(camera.now + 2 * SECOND);
        let status = camera.engine.status(&id("x"), camera.now);
        let newest = status.and_then(|s| s.setting).expect("there is always one");
        if newest.number != number && newest.effect_ns <= camera.now {
            number = newest.number;
            let effects = camera.apply(Event::Applied {
                crossing: id("x"),
                epoch: newest.epoch,
                number,
                house_ns: newest.effect_ns,
                sink_sample: count(newest.effect_ns),
            });
            said.extend(effects.transitions.into_iter().filter(|t| {
                matches!(
                    t,
                    Transition::Centred { .. } | Transition::ClockFault { .. }
                )
            }));
        }
    }
    said
}

fn restless() -> Camera {
    let mut camera = Camera::new(8e-6, samples(8e-6));
    camera.apply(Event::DeclareCrossing(CrossingDeclaration {
        review_horizon_ns: 60 * SECOND,
        ..crossing("x", "cam", "house")
    }));
    camera
}

#[test]
fn a_sink_whose_count_falls_began_anew() {
    let mut camera = restless();
    let rate = |ns: i64| (ns as f64 * 48e-6) as u64 + 1_000;
    assert_eq!(follow(&mut camera, HOUR / 2, rate), []);
    let since = camera.now;
    let said = follow(&mut camera, HOUR, |ns| rate(ns - since));
    let [
        Transition::Centred {
            reason,
            phase_error_samples,
            ..
        },
    ] = &said[..]
    else {
        panic!("{said:?}")
    };
    assert!(
        reason.contains("the count of the sink house fell"),
        "{reason}"
    );
    assert_eq!(*phase_error_samples, 0.0);
}

#[test]
fn a_sink_that_counts_at_another_rate_is_at_fault_until_it_does_not() {
    let mut camera = restless();
    let rate = |ns: i64, drift: f64| (ns as f64 * 48e-6 * (1.0 + drift)) as u64 + 1;
    // 1000 ppm of a minute are 60 ms, and a count is good to 2 ms.
    let said = follow(&mut camera, HOUR / 2, |ns| rate(ns, 1e-3));
    let [
        Transition::ClockFault {
            clock,
            fault: Some(fault),
        },
    ] = &said[..]
    else {
        panic!("{said:?}")
    };
    assert_eq!(*clock, id("house"));
    let ClockFault::CountedOtherwise { counted, .. } = fault else {
        panic!("{fault}")
    };
    assert!((counted - 1e-3).abs() < 1e-6);
    assert!(fault.to_string().contains("+1000.0"), "{fault}");
    // Without the crossing nobody counts any more.
    let mut without = camera.engine.clone();
    let deleted = without.apply(&Event::DeleteCrossing(id("x")), camera.now);
    let told = deleted.expect("it is there").transitions;
    assert!(
        matches!(told[..], [Transition::ClockFault { fault: None, .. }]),
        "{told:?}"
    );
    let before = rate(camera.now, 1e-3);
    let since = camera.now;
    let said = follow(&mut camera, HOUR, |ns| before + rate(ns - since, 0.0));
    assert!(
        matches!(said[..], [Transition::ClockFault { fault: None, .. }]),
        "{said:?}"
    );
}

#[test]
fn what_is_declared_of_an_oscillator_reaches_the_estimator() {
    let mut engine = Engine::new(1);
    let rate = Ratio::from_integer(48_000);
    let plain = ClockDeclaration::new(id("plain"), rate);
    let atomic = ClockDeclaration {
        oscillator: Some(Oscillator::Atomic),
        tail: Some(LatencyTail::CounterLate),
        quantum_ns: 1_000_000,
        ..ClockDeclaration::new(id("atomic"), rate)
    };
    for declaration in [&plain, &atomic] {
        let declare = Event::DeclareClock(declaration.clone());
        engine.apply(&declare, 0).expect("a good clock");
    }
    let deviation = |engine: &Engine, name: &str, at: i64| {
        let estimate = engine.estimate(&id(name), at).expect("it was declared");
        estimate.estimate.deviation
    };
    // Before anything is measured: 0.01 ppm of an atomic clock, 100 ppm at 95 % of any other.
    assert!((deviation(&engine, "atomic", 0) - 1e-8).abs() < 1e-12);
    assert!((deviation(&engine, "plain", 0) - 100e-6 / 1.96).abs() < 1e-7);
    // A step of a millisecond is worth less than ticks of 21 µs.
    let coarse = ClockDeclaration {
        id: id("coarse"),
        quantum_ns: 1_000_000,
        ..plain.clone()
    };
    let declare = Event::DeclareClock(coarse);
    engine.apply(&declare, 0).expect("a good clock");
    for second in 1..120 {
        for name in ["plain", "coarse"] {
            let reading = Event::Reading(Reading {
                clock: id(name),
                reference: Reference::House,
                probe: "rack".into(),
                sequence: 0,
                measurement: Measurement::Counter {
                    count: 48_000 * second,
                    bits: 64,
                    reference_ns: second as i64 * SECOND,
                },
            });
            engine
                .apply(&reading, second as i64 * SECOND)
                .expect("good");
        }
    }
    let at = 120 * SECOND;
    assert!(deviation(&engine, "coarse", at) > 3.0 * deviation(&engine, "plain", at));
    let wrong = Event::DeclareClock(ClockDeclaration {
        quantum_ns: -1,
        ..plain
    });
    let refusal = engine.apply(&wrong, at).expect_err("a negative step");
    assert_eq!(refusal.field, "quantum_ns");
}

#[test]
fn statistics_are_kept_of_the_clocks_that_are_declared_to_have_them() {
    let walk_per_root_s = 1e-9;
    let mut camera = Camera::new(8e-6, samples(8e-6));
    camera.samples.0 = Clock::new(crystal(8e-6, walk_per_root_s), 3);
    camera.run_until(SECOND);
    assert!(camera.engine.stability(&id("cam")).is_empty());
    let declaration = camera.engine.clock(&id("cam")).expect("declared").clone();
    camera.apply(Event::DeclareClock(ClockDeclaration {
        statistics: true,
        ..declaration
    }));
    camera.run_until(6 * HOUR);
    let figures = camera.engine.stability(&id("cam"));
    assert_eq!(figures[0].tau_s, 10.0);
    assert!(figures.len() >= 9, "{} octaves", figures.len());
    // A random walk of the drift: the Allan deviation is walk·√(τ/3), by integration of
    // the walk over two adjacent intervals.
    for octave in figures
        .iter()
        .filter(|o| (300.0..1300.0).contains(&o.tau_s))
    {
        let expected = walk_per_root_s * (octave.tau_s / 3.0).sqrt();
        let allan = octave.allan.expect("hours of it were seen");
        assert!(
            (0.5..2.0).contains(&(allan / expected)),
            "{} s: {allan:e} for {expected:e}",
            octave.tau_s
        );
    }
}
