//! A follower that does not apply what it is sent: it is noticed as soon as physics allows, the account is
//! that of what truly runs, the slip is foretold, and all is well again once it hears.

mod world;

use ratewright_control::{CrossingState, CrossingStatus};
use ratewright_timing::sim::{ClockModel, Daily, Delay};
use world::{HOUR, SECOND, World, clock, crossing, crystal, id};

const MINUTE: i64 = 60 * SECOND;
const HEADROOM: f64 = 4.0;

fn status(world: &World) -> CrossingStatus {
    let status = world.engine.status(&id("x"), world.now);
    status.expect("it was declared")
}

/// A desk whose drift moves by a ppm in the course of a day, into the house; nothing is heard from
/// two hours on.
fn deaf_after_two_hours(levels: bool, reports: bool) -> World {
    let mut world = World::new();
    world.add_exact("house", 48_000);
    let daily = Some(Daily {
        amplitude: 1e-6,
        angle: 0.0,
    });
    let model = ClockModel {
        daily,
        ..crystal(12e-6, 1e-10)
    };
    let delay = Delay::Normal { deviation_s: 1e-6 };
    world.add(clock("desk", 44_100), model, delay, SECOND);
    world.cross(crossing("x", "desk", "house"));
    world.follow_late("x", 0, reports);
    if levels {
        world.gauge("x", 30 * SECOND, 0.05, 11);
    }
    world.run_until(2 * HOUR);
    world.deafen("x", true);
    world
}

/// Off the truth, in deviations.
fn account_off(world: &mut World) -> f64 {
    let now = status(world);
    let off = now.phase_error_samples - world.phase("x");
    off.abs() / now.phase_deviation_samples
}

/// Runs until the first setting that is not heeded has been in effect for this long.
fn run_past_the_first_unheard(world: &mut World, after_ns: i64) {
    let unheard = |world: &World| {
        let settings = &world.tally("x").changes;
        settings.iter().find(|c| c.0 > 2 * HOUR).map(|c| c.0)
    };
    while unheard(world).is_none() {
        world.run_until(world.now + MINUTE);
        assert!(world.now < 12 * HOUR, "the desk drifts");
    }
    let at_ns = unheard(world).expect("it was seen") + SECOND;
    world.run_until(at_ns + after_ns);
}

/// Runs minute by minute until the buffer slips; the minute before it was foretold.
fn run_to_the_slip(world: &mut World) {
    while world.phase("x").abs() <= HEADROOM {
        let foretold = status(world).seconds_to_slip;
        assert!(foretold.is_some(), "it will slip, and nobody says so");
        world.run_until(world.now + MINUTE);
        if world.phase("x").abs() > HEADROOM {
            assert!(foretold < Some(120.0), "{foretold:?} s were foretold");
        }
        assert!(
            world.now < 24 * HOUR,
            "nothing runs that could hold for ever"
        );
    }
}

#[test]
fn levels_tell_that_a_setting_is_not_run() {
    let mut world = deaf_after_two_hours(true, false);
    run_past_the_first_unheard(&mut world, 5 * MINUTE);
    let now = status(&world);
    assert_eq!(now.state, CrossingState::Degraded, "{}", now.reason);
    assert!(now.reason.contains("is not heeded"), "{}", now.reason);
    assert!(account_off(&mut world) < 5.0);
    let made = world.tally("x").settings.len();
    run_to_the_slip(&mut world);
    assert!(account_off(&mut world) < 5.0);
    // What nobody hears is not repeated every ten seconds.
    let (unheard, since_ns) = (world.tally("x").settings.len() - made, world.now);
    assert!(unheard <= 8, "{unheard} settings that nobody heard");
    world.deafen("x", false);
    world.run_until(since_ns + 20 * MINUTE);
    let now = status(&world);
    assert_eq!(now.state, CrossingState::Holding, "{}", now.reason);
    assert!(account_off(&mut world) < 5.0);
    assert!(world.phase("x").abs() < HEADROOM);
}

#[test]
fn a_follower_that_reports_and_then_does_not_is_not_vouched_for() {
    let mut world = deaf_after_two_hours(false, true);
    run_past_the_first_unheard(&mut world, MINUTE);
    let now = status(&world);
    assert_eq!(now.state, CrossingState::Degraded, "{}", now.reason);
    assert!(
        now.reason.contains("was not reported as applied"),
        "{}",
        now.reason
    );
    run_to_the_slip(&mut world);
    let since_ns = world.now;
    world.deafen("x", false);
    world.run_until(since_ns + 20 * MINUTE);
    let now = status(&world);
    assert_eq!(now.state, CrossingState::Holding, "{}", now.reason);
    assert!(account_off(&mut world) < 5.0);
}

#[test]
fn levels_of_a_follower_that_does_as_it_is_told_are_no_reason_for_doubt() {
    let mut world = deaf_after_two_hours(true, false);
    world.deafen("x", false);
    world.run_until(12 * HOUR);
    let states = &world.tally("x").states;
    let later = states.iter().filter(|s| s.0 > HOUR);
    assert_eq!(later.count(), 0, "it holds all the time: {states:?}");
}
