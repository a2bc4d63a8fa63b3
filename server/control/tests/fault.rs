//! Faults that physics does not let the engine hide: it must say so, and come back.

mod world;

use ratewright_control::{CrossingState, Event, Transition};
use ratewright_timing::sim::{ClockModel, Delay, Disturbance, Upset};
use world::{HOUR, SECOND, World, clock, crossing, crystal, id};

const MICROSECOND: Delay = Delay::Normal { deviation_s: 1e-6 };

fn facility(model: ClockModel) -> World {
    let mut world = World::new();
    world.add_exact("house", 48_000);
    world.add(clock("desk", 44_100), model, MICROSECOND, SECOND);
    world.cross(crossing("x", "desk", "house"));
    world
}

#[test]
fn a_clock_that_lies_by_200_ppm_is_told_and_recovered() {
    let upsets = vec![Upset {
        at_ns: HOUR,
        what: Disturbance::DriftJump(200e-6),
    }];
    let mut world = facility(ClockModel {
        upsets,
        ..crystal(8e-6, 1e-10)
    });
    world.run_until(HOUR + HOUR / 3);
    let degraded = world
        .tally("x")
        .states
        .iter()
        .find(|(at, state)| *at > HOUR && *state == CrossingState::Degraded);
    let (at, _) = degraded.expect("the crossing says that it is out of its headroom");
    assert!(
        at - HOUR < 60 * SECOND,
        "told after {} s",
        (at - HOUR) / SECOND
    );
    // Between two readings a second apart 9.6 samples may have come, or not: the account follows
    // all the rest, and says what it does not know.
    let status = world
        .engine
        .status(&id("x"), world.now)
        .expect("it was declared");
    let off = (status.phase_error_samples - world.phase("x")).abs();
    assert!(
        off < 2.0 * status.phase_deviation_samples,
        "account off by {off}"
    );
    assert!(
        status.phase_deviation_samples < 6.0,
        "{}",
        status.phase_deviation_samples
    );
    assert!(world.phase("x").abs() < 9.6);
    assert_eq!(status.state, CrossingState::Degraded);
    // The buffer's occupancy tells.
    let (crossing, level_samples, house_ns) = (id("x"), world.phase("x"), world.now);
    world.apply(Event::Occupancy {
        crossing,
        level_samples,
        deviation_samples: 0.1,
        house_ns,
    });
    world.run_until(2 * HOUR);
    let status = world
        .engine
        .status(&id("x"), world.now)
        .expect("it was declared");
    assert_eq!(status.state, CrossingState::Holding, "{}", status.reason);
    assert!(world.phase("x").abs() <= 4.0);
}

#[test]
fn when_all_readings_of_a_facility_stop_the_slip_is_forecast_before_it_can_happen() {
    let mut world = World::new();
    world.add(
        clock("desk", 44_100),
        crystal(8e-6, 1e-9),
        MICROSECOND,
        SECOND,
    );
    world.add(
        clock("wall", 48_000),
        crystal(-3e-6, 1e-9),
        MICROSECOND,
        SECOND,
    );
    world.cross(crossing("x", "desk", "wall"));
    world.run_until(3 * HOUR);
    for name in ["desk", "wall"] {
        world.silence(name, 3 * HOUR, i64::MAX);
    }
    let held = world
        .engine
        .status(&id("x"), world.now)
        .expect("it was declared");
    let forecast_s = held.seconds_to_slip.expect("nothing holds for ever");
    assert!(forecast_s > 60.0, "{forecast_s}");
    // The forecast is of the band, so the truth is still within when it comes.
    world.forget();
    world.run_until(3 * HOUR + (forecast_s * 1e9) as i64);
    assert!(
        world.tally("x").worst <= 4.0,
        "worst {}",
        world.tally("x").worst
    );
    world.run_until(5 * HOUR);
    let status = world
        .engine
        .status(&id("x"), world.now)
        .expect("it was declared");
    assert_eq!(status.state, CrossingState::Degraded, "{}", status.reason);
    // Uncertainty is no reason for unrest: what was right stays.
    let late = world
        .tally("x")
        .changes
        .iter()
        .filter(|(at, _)| *at > 3 * HOUR + HOUR / 2)
        .count();
    assert!(late < 20, "{late} changes while blind");
}

#[test]
fn a_counter_that_is_reset_costs_nothing() {
    let upsets = vec![Upset {
        at_ns: HOUR,
        what: Disturbance::PhaseStep(-0.5),
    }];
    let mut world = facility(ClockModel {
        upsets,
        ..crystal(8e-6, 1e-10)
    });
    world.run_until(HOUR - SECOND);
    let before = world.phase("x");
    world.run_until(HOUR + 60 * SECOND);
    // The samples themselves went on: the simulated step is one of the counter's reading.
    let status = world
        .engine
        .status(&id("x"), world.now)
        .expect("it was declared");
    assert!(
        (status.phase_error_samples - before).abs() < 4.0,
        "{}",
        status.phase_error_samples
    );
    assert_eq!(status.state, CrossingState::Holding, "{}", status.reason);
    let centred = world
        .transitions
        .iter()
        .any(|(_, t)| matches!(t, Transition::Centred { .. }));
    assert!(!centred);
}
