//! Jumps, steps, resets and route changes: found, named and survived.

use num_rational::Ratio;
use ratewright_timing::sim::{
    Clock, ClockModel, Delay, Disturbance, Path, PathModel, Upset, probe,
};
use ratewright_timing::{Event, Link, LinkConfig, Measurement, Outcome, State};

const NS: i64 = 1_000_000_000;
const HZ: u64 = 48_000;

fn tailed() -> Delay {
    Delay::Tailed {
        deviation_s: 15e-6,
        share: 0.15,
        tail_s: 100e-6,
        outliers: 0.003,
    }
}

fn path() -> PathModel {
    PathModel {
        least_s: 1e-3,
        loss: 0.02,
        ..PathModel::new(tailed())
    }
}

/// Events called, s, and the link at the end, of counter readings twice a second for an hour.
fn counter_hour(upsets: Vec<Upset>, seed: u64) -> (Vec<(f64, Event)>, Link, Clock) {
    let model = ClockModel {
        drift: -12e-6,
        upsets,
        ..ClockModel::crystal()
    };
    let mut clock = Clock::new(model, seed);
    let mut path = Path::new(path(), seed + 100);
    let hz = Ratio::from_integer(HZ);
    let mut link = Link::new(LinkConfig::new(hz)).unwrap();
    let mut calls = Vec::new();
    for i in 1..7200 {
        let at_ns = i * NS / 2;
        if let Some(reading) = probe::counter(&mut clock, &mut path, hz, 32, at_ns) {
            note(&mut calls, link.observe(i as u64, &reading), at_ns);
        }
    }
    (calls, link, clock)
}

fn note(
    calls: &mut Vec<(f64, Event)>,
    outcome: Result<Outcome, ratewright_timing::Refusal>,
    at_ns: i64,
) {
    if let Outcome::Event(event) = outcome.expect("simulated readings are possible") {
        calls.push((at_ns as f64 / 1e9, event));
    }
}

fn assert_covers(link: &Link, clock: &mut Clock, at_ns: i64) {
    let e = link.estimate(at_ns);
    let truth = clock.drift(at_ns);
    let off = (e.drift - truth).abs();
    assert!(
        off < 3.0 * e.half_width() / 1.96,
        "off by {off}, half-width {}",
        e.half_width()
    );
    assert_eq!(e.state, State::Locked);
}

#[test]
fn a_jump_of_the_drift_is_found_within_a_minute() {
    for seed in 0..8 {
        let by = if seed % 2 == 0 { 3e-6 } else { -3e-6 };
        let upset = Upset {
            at_ns: 1800 * NS,
            what: Disturbance::DriftJump(by),
        };
        let (calls, link, mut clock) = counter_hour(vec![upset], seed);
        let found = calls
            .iter()
            .find(|c| c.1 == Event::FrequencyJump && c.0 > 1800.0);
        let (at_s, _) = found.unwrap_or_else(|| panic!("seed {seed}: {calls:?}"));
        assert!(*at_s < 1860.0, "seed {seed}: {calls:?}");
        assert_covers(&link, &mut clock, 3599 * NS);
    }
}

#[test]
fn a_step_of_the_phase_leaves_the_drift_alone() {
    for seed in 0..8 {
        let upset = Upset {
            at_ns: 1800 * NS,
            what: Disturbance::PhaseStep(25e-3),
        };
        let (calls, link, mut clock) = counter_hour(vec![upset], seed);
        let found = calls
            .iter()
            .any(|c| c.1 == Event::PhaseStep && c.0 < 1810.0);
        assert!(found, "seed {seed}: {calls:?}");
        assert_eq!(link.history().events.phase_steps, 1);
        assert_covers(&link, &mut clock, 3599 * NS);
    }
}

#[test]
fn a_reset_of_the_counter_is_a_step() {
    let hz = Ratio::from_integer(HZ);
    for bits in [32, 64] {
        let mut clock = Clock::new(
            ClockModel {
                drift: 7e-6,
                ..ClockModel::crystal()
            },
            4,
        );
        let mut path = Path::new(path(), 5);
        let mut link = Link::new(LinkConfig::new(hz)).unwrap();
        let mut calls = Vec::new();
        let mut base = 0;
        for i in 1..3600 {
            let Some(reading) = probe::counter(&mut clock, &mut path, hz, bits, i * NS) else {
                continue;
            };
            let Measurement::Counter {
                count,
                reference_ns,
                ..
            } = reading
            else {
                unreachable!()
            };
            if i == 1800 {
                base = count;
            }
            let count = count - base;
            let m = Measurement::Counter {
                count,
                bits,
                reference_ns,
            };
            note(&mut calls, link.observe(i as u64, &m), i * NS);
        }
        assert_eq!(calls.len(), 1, "{calls:?}");
        assert_eq!(calls[0].1, Event::PhaseStep);
        assert_covers(&link, &mut clock, 3599 * NS);
    }
}

/// A reset by hours is 10¹⁰ µs: kept with the 24 bits of single precision anywhere on its way,
/// the step would come out wrong by a thousand µs, and the phase and for minutes the drift with
/// it. Only steps show this, and only huge ones.
#[test]
fn a_step_of_hours_leaves_phase_and_drift_as_exact_as_one_of_milliseconds() {
    let worst = |by_s: f64, two_way: bool, seed: u64| -> (f64, f64) {
        let upset = Upset {
            at_ns: 1800 * NS,
            what: Disturbance::PhaseStep(by_s),
        };
        let model = ClockModel {
            drift: 9e-6,
            upsets: vec![upset],
            ..ClockModel::crystal()
        };
        let mut clock = Clock::new(model, seed);
        let mut out = Path::new(path(), seed + 1);
        let mut back = Path::new(path(), seed + 2);
        let hz = Ratio::from_integer(HZ);
        let mut link = Link::new(LinkConfig::new(hz)).unwrap();
        let (mut drift_off, mut phase_off) = (0.0_f64, 0.0_f64);
        for i in 1..3000 {
            let at_ns = i * NS;
            let reading = if two_way {
                probe::exchange(&mut clock, &mut out, &mut back, at_ns)
            } else {
                probe::counter(&mut clock, &mut out, hz, 64, at_ns)
            };
            let Some(reading) = reading else { continue };
            link.observe(i as u64, &reading).unwrap();
            // The step is not part of the phase, so that neither is it of what is gained.
            if i > 1830 {
                let e = link.estimate(at_ns);
                let gained_ns = (at_ns - NS) as f64 * 9e-6;
                phase_off = phase_off.max((e.phase_ns - gained_ns).abs());
                drift_off = drift_off.max((e.drift - clock.drift(at_ns)).abs());
            }
        }
        assert_eq!(link.history().events.phase_steps, 1, "step of {by_s} s");
        (drift_off, phase_off)
    };
    for two_way in [false, true] {
        for (seed, by_s) in [
            (1, 40_000.0_f64),
            (2, -40_000.0),
            (3, 123_456.7),
            (4, -654_321.1),
        ] {
            let (small_drift, small_phase) = worst(by_s.signum() * 25e-3, two_way, seed);
            let (drift, phase) = worst(by_s, two_way, seed);
            assert!(
                drift < 1.5 * small_drift + 5e-9 && phase < small_phase + 50_000.0,
                "step of {by_s} s, two-way {two_way}: drift off {drift} against {small_drift}, \
                 phase {phase} ns against {small_phase}"
            );
        }
    }
}

/// A reading whose reference time is wrong by an hour is as if it had not come; a clock that was
/// reset while nothing came is followed from the second reading on.
#[test]
fn one_wrong_time_costs_one_reading() {
    let hz = Ratio::from_integer(HZ);
    let mut clock = Clock::new(ClockModel::crystal(), 3);
    let mut path = Path::new(path(), 4);
    let mut link = Link::new(LinkConfig::new(hz)).unwrap();
    let mut sequence = 0;
    let mut read = |link: &mut Link, at_ns: i64, wrong_ns: i64| {
        let m = match probe::counter(&mut clock, &mut path, hz, 32, at_ns) {
            Some(Measurement::Counter {
                count,
                bits,
                reference_ns,
            }) => Measurement::Counter {
                count,
                bits,
                reference_ns: reference_ns + wrong_ns,
            },
            _ => return Ok(Outcome::Stale),
        };
        sequence += 1;
        link.observe(sequence, &m)
    };
    for i in 1..600 {
        read(&mut link, i * NS, 0).unwrap();
    }
    let before = link.estimate(600 * NS);
    let wrong = read(&mut link, 600 * NS, 3600 * NS);
    assert_eq!(wrong, Ok(Outcome::Outlier));
    for i in 601..700 {
        let outcome = read(&mut link, i * NS, 0);
        assert!(outcome.is_ok(), "{outcome:?}");
    }
    let after = link.estimate(700 * NS);
    assert_eq!(after.outliers - before.outliers, 1, "{after:?}");
    assert!(after.rows_used > before.rows_used + 90);
    assert_eq!(after.state, State::Locked);

    // Half an hour without readings, and all later ones an hour ahead: the second is believed.
    assert_eq!(read(&mut link, 2500 * NS, 3600 * NS), Ok(Outcome::Outlier));
    let used = link.estimate(6102 * NS).rows_used;
    for i in 2501..2700 {
        read(&mut link, i * NS, 3600 * NS).unwrap();
    }
    let e = link.estimate(6300 * NS);
    assert_eq!(e.last_reading_ns.map(|ns| ns / NS), Some(6299));
    assert!(e.rows_used > used + 150, "{e:?}");
}

#[test]
fn a_longer_route_one_way_moves_no_clock() {
    for (seed, longer_s) in [(0, 400e-6), (1, -400e-6), (2, 900e-6), (3, -900e-6)] {
        let delay = Delay::Gamma {
            shape: 2.0,
            scale_s: 40e-6,
            deviation_s: 2e-6,
        };
        let steady = PathModel {
            least_s: 3e-3,
            ..PathModel::new(delay)
        };
        let rerouted = PathModel {
            route_changes: vec![(3600 * NS, longer_s)],
            ..steady.clone()
        };
        let mut clock = Clock::new(
            ClockModel {
                drift: 30e-6,
                ..ClockModel::crystal()
            },
            seed,
        );
        let mut out = Path::new(rerouted, seed + 1);
        let mut back = Path::new(steady, seed + 2);
        let mut link = Link::new(LinkConfig::new(Ratio::from_integer(HZ))).unwrap();
        let mut calls = Vec::new();
        for i in 1..7200 {
            let reading = probe::exchange(&mut clock, &mut out, &mut back, i * NS).unwrap();
            note(&mut calls, link.observe(i as u64, &reading), i * NS);
        }
        let found = calls
            .iter()
            .any(|c| c.1 == Event::RouteChange && (3600.0..3900.0).contains(&c.0));
        assert!(found, "{longer_s} s: {calls:?}");
        assert_covers(&link, &mut clock, 7199 * NS);
    }
}

#[test]
fn a_step_of_a_clock_read_both_ways_is_no_route_change() {
    for (seed, by_s) in [(0, 25e-3), (1, -25e-3), (2, 4e-3), (3, -4e-3)] {
        let delay = Delay::Gamma {
            shape: 2.0,
            scale_s: 40e-6,
            deviation_s: 2e-6,
        };
        let steady = PathModel {
            least_s: 3e-3,
            ..PathModel::new(delay)
        };
        let upset = Upset {
            at_ns: 3601 * NS + seed as i64 * NS,
            what: Disturbance::PhaseStep(by_s),
        };
        let model = ClockModel {
            drift: 30e-6,
            upsets: vec![upset],
            ..ClockModel::crystal()
        };
        let mut clock = Clock::new(model, seed);
        let mut out = Path::new(steady.clone(), seed + 1);
        let mut back = Path::new(steady, seed + 2);
        let mut link = Link::new(LinkConfig::new(Ratio::from_integer(HZ))).unwrap();
        for i in 1..5400 {
            let reading = probe::exchange(&mut clock, &mut out, &mut back, i * NS).unwrap();
            link.observe(i as u64, &reading).unwrap();
        }
        let events = link.history().events;
        assert_eq!(
            (events.phase_steps, events.route_changes),
            (1, 0),
            "{by_s} s"
        );
        assert_covers(&link, &mut clock, 5399 * NS);
    }
}

#[test]
fn calm_hours_call_no_events() {
    let calls: usize = (0..8)
        .map(|seed| counter_hour(Vec::new(), seed).0.len())
        .sum();
    assert!(calls <= 1, "{calls} false calls in eight hours");
}
