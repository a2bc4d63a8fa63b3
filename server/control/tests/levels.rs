//! What a follower's levels are good for beyond the phase error of the moment.

mod world;

use ratewright_control::{CrossingState, CrossingStatus};
use ratewright_timing::sim::{ClockModel, Daily, Delay};
use world::{HOUR, SECOND, World, clock, crossing, crystal, id};

const MINUTE: i64 = 60 * SECOND;

fn status(world: &World) -> CrossingStatus {
    let status = world.engine.status(&id("x"), world.now);
    status.expect("it was declared")
}

/// A desk that wanders and warms up and cools down, into the house, with four samples of headroom
/// and with levels or without. It is not read in the third hour.
fn with_a_gap(walk_per_root_s: f64, levels: bool) -> World {
    let mut world = World::new();
    world.add_exact("house", 48_000);
    let daily = Some(Daily {
        amplitude: 1e-6,
        angle: 1.0,
    });
    let model = ClockModel {
        daily,
        ..crystal(12e-6, walk_per_root_s)
    };
    let delay = Delay::Normal { deviation_s: 1e-6 };
    world.add(clock("desk", 44_100), model, delay, SECOND);
    world.cross(crossing("x", "desk", "house"));
    if levels {
        world.gauge("x", 30 * SECOND, 0.05, 11);
    }
    world.silence("desk", 2 * HOUR, 3 * HOUR);
    world.run_until(2 * HOUR);
    world.forget();
    world
}

/// Runs on minute by minute; the account is never off by more than five deviations.
fn run_until(world: &mut World, end_ns: i64) {
    while world.now < end_ns {
        world.run_until(world.now + MINUTE);
        let now = status(world);
        let off = now.phase_error_samples - world.phase("x");
        let deviations = off.abs() / now.phase_deviation_samples;
        assert!(deviations < 5.0, "off by {off}, {deviations} deviations");
    }
}

#[test]
fn levels_teach_the_drift_and_carry_a_crossing_through_an_hour_without_readings() {
    for walk in [1e-10, 1e-9] {
        let mut world = with_a_gap(walk, true);
        run_until(&mut world, 3 * HOUR);
        let now = status(&world);
        assert_eq!(now.state, CrossingState::Holding, "{}", now.reason);
        assert!(now.phase_deviation_samples < 0.2);
        // The readings come back, and what levels have taught gives way to them.
        run_until(&mut world, 4 * HOUR);
        let tally = world.tally("x");
        assert!(tally.worst <= 4.0, "worst {}", tally.worst);
        let later = tally.settings.iter().filter(|s| s.decided_ns > 2 * HOUR);
        assert!(later.clone().count() <= 16, "{} settings", later.count());
    }
}

#[test]
fn without_levels_the_hour_changes_little_and_its_end_costs_a_setting_or_two() {
    for walk in [1e-10, 1e-9] {
        let mut world = with_a_gap(walk, false);
        run_until(&mut world, 3 * HOUR);
        assert_ne!(status(&world).state, CrossingState::Holding);
        run_until(&mut world, 3 * HOUR + 15 * MINUTE);
        assert_eq!(status(&world).state, CrossingState::Holding);
        let made = |from: i64, to: i64| {
            let settings = &world.tally("x").changes;
            settings
                .iter()
                .filter(|c| (from..to).contains(&c.0))
                .count()
        };
        let (within, after) = (made(2 * HOUR, 3 * HOUR), made(3 * HOUR, 4 * HOUR));
        assert!(within <= 4, "{walk}: {within} changes without readings");
        assert!(after <= 3, "{walk}: {after} changes when they come back");
    }
}
