//! Random lives of a small facility: whatever happens, what must hold holds.
//!
//! `PROPTEST_CASES` says how many, if it is set.

mod world;

use std::collections::BTreeMap;

use num_rational::Ratio;
use proptest::prelude::*;
use ratewright_control::{
    ClockDeclaration, CrossingDeclaration, Engine, Event, Id, Reading, Realisation, Realised,
    Reference,
};
use ratewright_ratio::{Bounds, Certificate, CertificateError};
use ratewright_timing::Measurement;
use world::{SECOND, clock, crossing, id};

const CLOCKS: [&str; 4] = ["ca", "cb", "cc", "cd"];
const CROSSINGS: [&str; 3] = ["xa", "xb", "xc"];

fn name(names: &'static [&'static str]) -> impl Strategy<Value = Id> {
    proptest::sample::select(names).prop_map(id)
}

fn declared_clock() -> impl Strategy<Value = Event> {
    let hz = proptest::sample::select(&[8_000_u64, 44_100, 48_000, 192_000][..]);
    let pulled = any::<bool>();
    (name(&CLOCKS), hz, pulled, any::<bool>(), 0.0..200.0).prop_map(
        |(id, hz, pulled, exact, tolerance_ppm)| {
            let nominal_hz = if pulled {
                Ratio::new(hz * 1000, 1001)
            } else {
                Ratio::from_integer(hz)
            };
            Event::DeclareClock(ClockDeclaration {
                id,
                nominal_hz,
                exact,
                tolerance_ppm,
                ..clock("a", 1)
            })
        },
    )
}

fn declared_crossing() -> impl Strategy<Value = Event> {
    let bounds = (
        1_u64..3000,
        1_u64..3000,
        proptest::option::weighted(0.2, 2_u64..30),
    )
        .prop_map(|(l, m, prime)| {
            let bounds = Bounds::new(l, m).expect("in range");
            prime.map_or(bounds, |prime| {
                bounds.with_largest_prime(prime).expect("in range")
            })
        });
    const REALISATIONS: [Realisation; 4] = [
        Realisation::Single,
        Realisation::Cadence,
        Realisation::Stepping,
        Realisation::Lazy,
    ];
    let shape = (
        0.05..50.0,
        proptest::sample::select(&REALISATIONS[..]),
        proptest::option::of(Just(id("g"))),
        proptest::option::of(name(&CLOCKS)),
        proptest::bool::weighted(0.2),
    );
    let floor = prop_oneof![2 => Just(0), 1 => 0..100 * SECOND];
    let times = (0..5 * SECOND, 10 * SECOND..1000 * SECOND, floor);
    (
        name(&CROSSINGS),
        name(&CLOCKS),
        name(&CLOCKS),
        bounds,
        shape,
        times,
    )
        .prop_map(
            |(
                id,
                source,
                sink,
                bounds,
                (headroom_samples, realisation, group, backup, silent),
                (lead_ns, review_horizon_ns, least_hold_ns),
            )| {
                Event::DeclareCrossing(CrossingDeclaration {
                    id,
                    source,
                    sink,
                    bounds,
                    headroom_samples,
                    realisation,
                    group,
                    lead_ns,
                    review_horizon_ns,
                    least_hold_ns,
                    backup,
                    silent,
                    ..crossing("x", "a", "b")
                })
            },
        )
}

fn reading() -> impl Strategy<Value = Event> {
    let measurement = prop_oneof![
        (any::<u64>(), 1_u32..=64, any::<i64>()).prop_map(|(count, bits, reference_ns)| {
            Measurement::Counter {
                count: count >> (64 - bits),
                bits,
                reference_ns,
            }
        }),
        (-1e-4..1e-4, 1e-10..1e-5, 0..5000 * SECOND).prop_map(
            |(drift, deviation, reference_ns)| {
                Measurement::Frequency {
                    drift,
                    deviation,
                    reference_ns,
                }
            }
        ),
    ];
    let reference = proptest::option::of(name(&CLOCKS));
    (name(&CLOCKS), reference, 0..3_u8, measurement).prop_map(
        |(clock, host, probe, measurement)| {
            Event::Reading(Reading {
                clock,
                reference: host.map_or(Reference::House, Reference::Clock),
                probe: format!("p{probe}"),
                sequence: 0,
                measurement,
            })
        },
    )
}

fn report() -> impl Strategy<Value = Event> {
    let applied = (
        name(&CROSSINGS),
        1..3_u64,
        1..40_u64,
        any::<i64>(),
        0..3000_i64,
        prop_oneof![Just(0), 1..200_000_000_u64],
    )
        .prop_map(|(crossing, epoch, number, wild, second, sink_sample)| {
            let house_ns = if wild % 4 == 0 { wild } else { second * SECOND };
            Event::Applied {
                crossing,
                epoch,
                number,
                house_ns,
                sink_sample,
            }
        });
    let level = (name(&CROSSINGS), -100.0..100.0, 0.001..10.0, 0..3000_i64).prop_map(
        |(crossing, level_samples, deviation_samples, second)| Event::Occupancy {
            crossing,
            level_samples,
            deviation_samples,
            house_ns: second * SECOND,
        },
    );
    prop_oneof![applied, level]
}

/// The operator's hand; now and then one without a name.
fn hand() -> impl Strategy<Value = Event> {
    let by = prop_oneof![9 => Just("night shift".to_owned()), 1 => Just(String::new())];
    (name(&CROSSINGS), name(&CLOCKS), by, 0..3_u8).prop_map(|(crossing, source, by, what)| {
        let note = String::new();
        match what {
            0 => Event::Pin { crossing, by, note },
            1 => Event::Release { crossing, by, note },
            _ => Event::ChangeOver {
                crossing,
                source,
                by,
                note,
            },
        }
    })
}

/// A report of one of the crossing's first settings, or a level, not long after the begin.
fn early_report() -> impl Strategy<Value = Event> {
    let applied = (name(&CROSSINGS), 1..6_u64, 0..120_i64, 1..10_000_000_u64).prop_map(
        |(crossing, number, second, sink_sample)| Event::Applied {
            crossing,
            epoch: 1,
            number,
            house_ns: second * SECOND,
            sink_sample,
        },
    );
    let level = (name(&CROSSINGS), -5.0..5.0, 0.001..0.1, 0..120_i64).prop_map(
        |(crossing, level_samples, deviation_samples, second)| Event::Occupancy {
            crossing,
            level_samples,
            deviation_samples,
            house_ns: second * SECOND,
        },
    );
    prop_oneof![1 => applied, 2 => level]
}

/// An event, with the seconds since the one before (now and then backwards, or years).
fn step() -> impl Strategy<Value = (Event, i64)> {
    let event = prop_oneof![
        3 => declared_clock(),
        4 => declared_crossing(),
        6 => reading(),
        2 => report(),
        4 => early_report(),
        2 => hand(),
        1 => name(&CLOCKS).prop_map(Event::DeleteClock),
        1 => name(&CROSSINGS).prop_map(Event::DeleteCrossing),
        1 => (1..4_u64).prop_map(|epoch| Event::OpenEpoch { epoch }),
        6 => Just(Event::Tick),
    ];
    let pause_ns = prop_oneof![20 => 0..40 * SECOND, 1 => -SECOND..0, 1 => 0..400_000_000 * SECOND];
    (event, pause_ns)
}

/// A run of frequency readings of all clocks, so that crossings leave their waiting state.
fn measured(first_second: i64) -> Vec<(Event, i64)> {
    let mut steps = Vec::new();
    for i in 0..4 {
        for (j, name) in CLOCKS.iter().enumerate() {
            let reading = Reading {
                clock: id(name),
                reference: Reference::House,
                probe: "steady".into(),
                sequence: 0,
                measurement: Measurement::Frequency {
                    drift: 1e-5 * j as f64 - 1.3e-5,
                    deviation: 1e-8,
                    reference_ns: (first_second + i) * SECOND,
                },
            };
            steps.push((Event::Reading(reading), SECOND / 4));
        }
    }
    steps
}

/// Highest (epoch, number) seen of each crossing.
type Numbers = BTreeMap<Id, (u64, u64)>;

fn check(
    engine: &Engine,
    event: &Event,
    effects: &ratewright_control::Effects,
    numbers: &mut Numbers,
) {
    for setting in &effects.settings {
        let number = (setting.epoch, setting.number);
        let before = numbers.insert(setting.crossing.clone(), number);
        assert!(
            before.is_none_or(|before| before < number),
            "{number:?} after {before:?}"
        );
        let declaration = engine
            .crossing(&setting.crossing)
            .expect("a setting is of a crossing");
        let bounds = &declaration.bounds;
        match setting.realised {
            Realised::Single(ratio) => assert!(bounds.allow(&ratio), "{ratio} in {bounds:?}"),
            Realised::Cadence(cadence) => {
                assert!(bounds.allow(&cadence.low()) && bounds.allow(&cadence.high()));
                assert_eq!(declaration.realisation, Realisation::Cadence);
            }
            Realised::Stepping(stepping) => {
                assert_eq!(stepping.phases(), bounds.max_l());
                assert_eq!(declaration.realisation, Realisation::Stepping);
            }
            Realised::Lazy { cadence, .. } => {
                assert!(bounds.allow(&cadence.low()) && bounds.allow(&cadence.high()));
                assert_eq!(declaration.realisation, Realisation::Lazy);
            }
        }
        match setting.verify(bounds) {
            Ok(()) => {}
            Err(CertificateError::Uncertified(_)) => assert!(bounds.largest_prime().is_some()),
            Err(error) => panic!("{error} after {event:?}: {setting:?}"),
        }
        if let Certificate::Uncertified(_) = setting.certificate {
            assert!(bounds.largest_prime().is_some());
        }
        assert!(setting.decided_ns <= setting.effect_ns && setting.effect_ns < setting.review_ns);
        assert!(setting.review_ns < setting.expiry_ns);
        assert!(setting.residual.is_finite() && setting.evidence.phase_error_samples.is_finite());
        assert!(setting.seconds_to_slip.is_none_or(|s| s >= 0.0));
    }
}

/// Lives through the steps; every refusal must leave the bytes as they were.
fn live(steps: &[(Event, i64)]) -> Engine {
    let bytes = |engine: &Engine| postcard::to_stdvec(engine).expect("the state can be saved");
    let (mut engine, mut now, mut numbers) = (Engine::new(1), 0_i64, Numbers::new());
    for (step, (event, pause_ns)) in steps.iter().enumerate() {
        now = now.saturating_add(*pause_ns);
        let before = bytes(&engine);
        match engine.apply(event, now) {
            Ok(effects) => check(&engine, event, &effects, &mut numbers),
            Err(refusal) => {
                assert!(!refusal.field.is_empty() && !refusal.accepted.is_empty());
                assert_eq!(bytes(&engine), before, "{refusal}");
            }
        }
        if step % 16 == 0 || step + 1 == steps.len() {
            check_standings(&engine, now);
        }
    }
    engine
}

fn check_standings(engine: &Engine, now: i64) {
    for crossing in CROSSINGS {
        if let Some(status) = engine.status(&id(crossing), now) {
            assert!(status.setting.is_some(), "a crossing always has a setting");
            assert!(
                status.phase_error_samples.is_finite() && status.phase_deviation_samples >= 0.0
            );
        }
    }
}

proptest! {
    #![proptest_config(world::cases(256))]

    #[test]
    fn any_life_keeps_numbers_bounds_and_proofs(
        begin in proptest::collection::vec(prop_oneof![declared_clock(), declared_crossing()], 6..12),
        wild in proptest::collection::vec(step(), 0..40),
    ) {
        let mut steps: Vec<(Event, i64)> = begin.into_iter().map(|event| (event, 0)).collect();
        steps.extend(measured(1));
        steps.extend(wild);
        let (one, other) = (live(&steps), live(&steps));
        prop_assert_eq!(postcard::to_stdvec(&one), postcard::to_stdvec(&other));
    }
}
