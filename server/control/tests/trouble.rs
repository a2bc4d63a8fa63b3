//! What happens when things break: the phase error stays in its bound wherever physics allow, and
//! where they do not the breach is foretold.

mod world;

use ratewright_control::{
    ClockDeclaration, CrossingDeclaration, CrossingState, CrossingStatus, Setting,
};
use ratewright_timing::State;
use ratewright_timing::sim::{ClockModel, Delay, Disturbance, PathModel, Upset};
use world::{DAY, HOUR, SECOND, World, clock, crossing, crystal, id};

const MINUTE: i64 = 60 * SECOND;

/// Readings of a microsecond.
fn fine() -> Delay {
    Delay::Normal { deviation_s: 1e-6 }
}

/// Counts are latched as they change: what is read steps by a nanosecond.
fn latched(name: &str, hz: u64) -> ClockDeclaration {
    ClockDeclaration {
        quantum_ns: 1,
        ..clock(name, hz)
    }
}

/// A desk read each second, into an exact house clock, with so much headroom.
fn desk(model: ClockModel, path: PathModel, headroom_samples: f64) -> World {
    let mut world = World::new();
    world.add_exact("house", 48_000);
    world.add_read_by(latched("desk", 44_100), model, path, SECOND, 5);
    world.cross(CrossingDeclaration {
        headroom_samples,
        ..crossing("x", "desk", "house")
    });
    world
}

fn status(world: &World, name: &str) -> CrossingStatus {
    let status = world.engine.status(&id(name), world.now);
    status.expect("it was declared")
}

fn clock_state(world: &World, name: &str) -> State {
    let estimate = world.engine.estimate(&id(name), world.now);
    estimate.expect("it was declared").estimate.state
}

/// The account and the truth agree to within five deviations.
fn assert_account(world: &World, name: &str) {
    let status = status(world, name);
    let off = status.phase_error_samples - world.phase_of(name);
    let deviations = off.abs() / status.phase_deviation_samples;
    assert!(
        deviations < 5.0,
        "{name}: off by {off}, {deviations} deviations"
    );
}

/// Runs on minute by minute to `end_ns`; gives when the forecast of a slip first came true, and
/// checks that no slip came earlier than was foretold the minute before.
fn run_watching(world: &mut World, name: &str, headroom: f64, end_ns: i64) -> Option<i64> {
    let mut slipped = None;
    while world.now < end_ns {
        let foretold = status(world, name).seconds_to_slip;
        let begun_ns = world.now;
        world.run_until(begun_ns + MINUTE);
        if slipped.is_none() && world.phase_of(name).abs() > headroom {
            slipped = Some(world.now);
            let soon = foretold.is_some_and(|seconds| seconds <= 60.0);
            assert!(
                soon,
                "a slip within a minute, when {foretold:?} s were foretold"
            );
        }
    }
    slipped
}

#[test]
fn a_day_without_readings_is_foretold_and_made_good() {
    let mut world = desk(crystal(12e-6, 1e-10), PathModel::new(fine()), 4.0);
    let (from, to) = (4 * HOUR, 4 * HOUR + DAY);
    world.silence("desk", from, to);
    world.run_until(from);
    assert_eq!(status(&world, "x").state, CrossingState::Holding);
    world.run_until(from + 10 * MINUTE);
    assert_eq!(clock_state(&world, "desk"), State::Holdover);
    let foretold = status(&world, "x").seconds_to_slip;
    assert!(foretold.is_some(), "nobody can promise a day of a crystal");
    run_watching(&mut world, "x", 4.0, to);
    assert_account(&world, "x");
    assert_ne!(status(&world, "x").state, CrossingState::Holding);
    world.run_until(to + HOUR);
    assert_account(&world, "x");
    assert_eq!(status(&world, "x").state, CrossingState::Holding);
    assert!(world.phase("x").abs() < 4.0);
}

#[test]
fn when_every_reading_stops_every_crossing_holds_as_long_as_it_can() {
    let mut world = World::new();
    world.add_exact("house", 48_000);
    for (name, hz, drift) in [("desk", 44_100, 12e-6), ("wall", 96_000, -21e-6)] {
        world.add(latched(name, hz), crystal(drift, 1e-10), fine(), SECOND);
    }
    let pairs = [
        ("xa", "desk", "house"),
        ("xb", "desk", "wall"),
        ("xc", "wall", "house"),
    ];
    for (name, source, sink) in pairs {
        world.cross(CrossingDeclaration {
            headroom_samples: 40.0,
            ..crossing(name, source, sink)
        });
    }
    let (from, to) = (3 * HOUR, 5 * HOUR);
    world.silence("desk", from, to);
    world.silence("wall", from, to);
    world.run_until(from);
    world.forget();
    world.run_until(to);
    for (name, ..) in pairs {
        assert_account(&world, name);
        assert!(
            world.tally(name).worst <= 40.0,
            "{name}: {}",
            world.tally(name).worst
        );
    }
    world.run_until(to + HOUR);
    for (name, ..) in pairs {
        assert_eq!(status(&world, name).state, CrossingState::Holding, "{name}");
        assert!(world.tally(name).slips.is_empty());
    }
}

#[test]
fn a_clock_that_goes_off_by_200_ppm_is_followed_and_disturbs_nobody() {
    let run = |jumps: bool| {
        let mut model = crystal(12e-6, 1e-10);
        if jumps {
            model.upsets.push(Upset {
                at_ns: 2 * HOUR,
                what: Disturbance::DriftJump(200e-6),
            });
        }
        // What is gained until the jump is found, 400 samples, comes on top of what is planned.
        let mut world = desk(model, PathModel::new(fine()), 2000.0);
        world.add(
            latched("wall", 96_000),
            crystal(-21e-6, 1e-10),
            fine(),
            SECOND,
        );
        world.cross(crossing("other", "wall", "house"));
        world.run_until(4 * HOUR);
        world
    };
    let world = run(true);
    assert!(
        world.tally("x").worst <= 2000.0,
        "worst {}",
        world.tally("x").worst
    );
    let status = status(&world, "x");
    assert_eq!(status.state, CrossingState::Holding, "{}", status.reason);
    assert_account(&world, "x");
    let others = |world: &World| -> Vec<Setting> { world.tally("other").settings.clone() };
    assert_eq!(others(&world), others(&run(false)));
}

#[test]
fn a_step_of_the_readings_moves_no_phase_error() {
    // From two hours on every reading comes by a route that is 2 ms longer.
    let path = PathModel {
        route_changes: vec![(2 * HOUR, 2e-3)],
        ..PathModel::new(fine())
    };
    let mut world = desk(crystal(12e-6, 1e-10), path, 4.0);
    world.run_until(HOUR);
    world.forget();
    world.run_until(4 * HOUR);
    let tally = world.tally("x");
    assert!(tally.worst <= 4.0, "worst {}", tally.worst);
    assert!(tally.slips.is_empty());
    assert_eq!(status(&world, "x").state, CrossingState::Holding);
    assert_account(&world, "x");
}

#[test]
fn a_counter_that_begins_again_moves_no_phase_error() {
    let mut world = desk(crystal(12e-6, 1e-10), PathModel::new(fine()), 4.0);
    world.run_until(2 * HOUR);
    world.forget();
    world.reset_counter("desk");
    world.run_until(4 * HOUR);
    let tally = world.tally("x");
    assert!(tally.worst <= 4.0, "worst {}", tally.worst);
    assert_eq!(status(&world, "x").state, CrossingState::Holding);
    assert_account(&world, "x");
}
