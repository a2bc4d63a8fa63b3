//! Readings that lie by 200 ppm: where something else speaks against them the phase error keeps its bound, and
//! where it cannot the breach is foretold.

mod world;

use ratewright_control::{CrossingDeclaration, CrossingState, CrossingStatus};
use ratewright_timing::sim::{Delay, PathModel};
use world::{HOUR, SECOND, World, clock, crossing, crystal, id};

const MINUTE: i64 = 60 * SECOND;
const LIE: f64 = 200e-6;

fn status(world: &World) -> CrossingStatus {
    let status = world.engine.status(&id("x"), world.now);
    status.expect("it was declared")
}

fn fine() -> PathModel {
    PathModel::new(Delay::Normal { deviation_s: 1e-6 })
}

/// A desk into the house.
fn desk(headroom_samples: f64) -> World {
    let mut world = World::new();
    world.add_exact("house", 48_000);
    let model = crystal(12e-6, 1e-10);
    world.add_read_by(clock("desk", 44_100), model, fine(), SECOND, 5);
    world.cross(CrossingDeclaration {
        headroom_samples,
        ..crossing("x", "desk", "house")
    });
    world
}

/// Off the truth, in deviations.
fn account_off(world: &World) -> f64 {
    let now = status(world);
    let off = now.phase_error_samples - world.phase_of("x");
    off.abs() / now.phase_deviation_samples
}

#[test]
fn one_of_two_probes_that_lies_is_left_for_the_other() {
    let mut world = desk(40.0);
    world.add_probe("desk", "spare", fine(), 77);
    world.run_until(2 * HOUR);
    world.forget();
    world.lie("desk", LIE);
    world.run_until(4 * HOUR);
    let estimate = world.engine.estimate(&id("desk"), world.now);
    let estimate = estimate.expect("it was declared");
    assert_eq!(estimate.probe.as_deref(), Some("spare"));
    assert!((estimate.estimate.drift - 12e-6).abs() < 1e-7);
    assert!(world.tally("x").worst <= 40.0, "{}", world.tally("x").worst);
    assert!(account_off(&world) < 5.0);
}

#[test]
fn levels_are_believed_against_the_only_readings_there_are() {
    let mut world = desk(4000.0);
    world.gauge("x", 30 * SECOND, 0.05, 11);
    world.run_until(2 * HOUR);
    world.forget();
    world.lie("desk", LIE);
    world.run_until(2 * HOUR + 5 * MINUTE);
    let now = status(&world);
    assert_eq!(now.state, CrossingState::Degraded);
    assert!(
        now.reason
            .contains("speak against the readings of its clocks, by -199.9"),
        "{}",
        now.reason
    );
    // The account is that of the truth, and the truth keeps its bound.
    while world.now < 4 * HOUR {
        world.run_until(world.now + MINUTE);
        assert!(account_off(&world) < 5.0, "{}", account_off(&world));
    }
    assert!(
        world.tally("x").worst <= 4000.0,
        "{}",
        world.tally("x").worst
    );
    // The lie ends, and the readings are believed again.
    world.lie("desk", 0.0);
    world.run_until(4 * HOUR + 30 * MINUTE);
    let now = status(&world);
    assert_eq!(now.state, CrossingState::Holding, "{}", now.reason);
    assert!(account_off(&world) < 5.0);
}

#[test]
fn what_no_level_can_tell_in_time_is_not_vouched_for() {
    // A buffer of four samples is through in half a second, and levels come each half minute.
    let mut world = desk(4.0);
    world.gauge("x", 30 * SECOND, 0.05, 11);
    world.run_until(2 * HOUR);
    world.lie("desk", LIE);
    world.run_until(2 * HOUR + MINUTE);
    while world.now < 2 * HOUR + 20 * MINUTE {
        let now = status(&world);
        assert_ne!(now.state, CrossingState::Holding, "{}", now.reason);
        world.run_until(world.now + 10 * SECOND);
    }
}
