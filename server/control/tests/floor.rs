//! The floor between changes, and the fastest deliberate change of pitch.

mod world;

use ratewright_control::{
    CrossingDeclaration, CrossingState, CrossingStatus, Event, Reason, Setting, explain,
};
use ratewright_ratio::Bounds;
use ratewright_timing::sim::{ClockModel, Delay, Disturbance, Upset};
use world::{HOUR, SECOND, World, average, clock, crossing, crystal, id};

const MICROSECOND: Delay = Delay::Normal { deviation_s: 1e-6 };

fn facility(model: ClockModel, declaration: CrossingDeclaration) -> World {
    let mut world = World::new();
    world.add_exact("house", 48_000);
    world.add(clock("desk", 44_100), model, MICROSECOND, SECOND);
    world.cross(declaration);
    world
}

fn status(world: &World) -> CrossingStatus {
    world
        .engine
        .status(&id("x"), world.now)
        .expect("it was declared")
}

/// Effects of the settings that change what is run.
fn changes(settings: &[Setting]) -> Vec<i64> {
    let changed = settings
        .windows(2)
        .filter(|pair| pair[0].realised != pair[1].realised);
    changed.map(|pair| pair[1].effect_ns).collect()
}

/// Shortest time between two changes, ns.
fn shortest(settings: &[Setting]) -> i64 {
    let changes = changes(settings);
    let holds = changes.windows(2).map(|pair| pair[1] - pair[0]);
    holds.min().expect("there are changes")
}

#[test]
fn no_two_changes_are_nearer_than_the_floor() {
    let restless = |least_hold_ns| {
        let mut world = facility(
            crystal(8e-6, 1e-9),
            CrossingDeclaration {
                headroom_samples: 0.5,
                review_horizon_ns: 60 * SECOND,
                least_hold_ns,
                ..crossing("x", "desk", "house")
            },
        );
        world.run_until(2 * HOUR);
        world.tally("x").settings.clone()
    };
    let floor_ns = 300 * SECOND;
    assert!(shortest(&restless(0)) < floor_ns, "there is need of one");
    let held = restless(floor_ns);
    assert!(shortest(&held) >= floor_ns, "{} ns", shortest(&held));
    // Renewals do not count, and go on.
    assert!(held.iter().any(|setting| setting.reason == Reason::Renewal));
}

#[test]
fn the_longest_floor_of_a_group_holds_for_all_of_it() {
    let floor_ns = 300 * SECOND;
    let member = |name: &str, least_hold_ns| CrossingDeclaration {
        id: id(name),
        headroom_samples: 0.5,
        group: Some(id("pair")),
        least_hold_ns,
        ..crossing("x", "desk", "house")
    };
    let mut world = facility(crystal(8e-6, 1e-9), member("x", 0));
    world.cross(member("y", floor_ns));
    world.run_until(HOUR);
    for name in ["x", "y"] {
        // A newcomer begins by itself: the first of the changes that both make is the second.
        let settings = &world.tally(name).settings;
        let made = changes(settings);
        assert!(made.len() > 3, "{name} changes");
        let least = made.windows(2).map(|pair| pair[1] - pair[0]).min();
        assert!(least >= Some(floor_ns), "{name}: {least:?}");
    }
    let told = explain(
        world.tally("y").settings.last().expect("settings"),
        &member("y", floor_ns),
    );
    assert!(
        told.iter()
            .any(|line| line.starts_with("Nothing else is run before 300.0 s after its effect")),
        "{told:?}"
    );
}

#[test]
fn a_breach_waits_for_the_floor_and_no_longer() {
    let upsets = vec![Upset {
        at_ns: HOUR,
        what: Disturbance::DriftJump(2e-6),
    }];
    let floor_ns = 600 * SECOND;
    let mut world = facility(
        ClockModel {
            upsets,
            ..crystal(8e-6, 1e-11)
        },
        CrossingDeclaration {
            headroom_samples: 0.5,
            ..crossing("x", "desk", "house")
        },
    );
    world.run_until(HOUR - 30 * SECOND);
    let declared = |bounds, least_hold_ns| CrossingDeclaration {
        headroom_samples: 0.5,
        bounds: Bounds::new(bounds, bounds).expect("in range"),
        least_hold_ns,
        ..crossing("x", "desk", "house")
    };
    // Other bounds make for a change at once, though under a floor of its own it would be early.
    world.apply(Event::DeclareCrossing(declared(1024, floor_ns)));
    let effects = world.apply(Event::DeclareCrossing(declared(900, floor_ns)));
    let before = effects.settings.last().expect("other bounds").clone();
    assert_eq!(before.reason, Reason::Declaration);
    // 2 ppm are 0.096 samples a second: within some seconds another setting is due.
    world.run_until(HOUR + 120 * SECOND);
    let waits = status(&world);
    assert_eq!(waits.state, CrossingState::Degraded, "{}", waits.reason);
    assert!(
        waits.reason.contains("the floor between changes leaves"),
        "{}",
        waits.reason
    );
    assert_eq!(waits.seconds_to_slip, Some(0.0), "the breach is told");
    world.run_until(before.effect_ns + floor_ns + 10 * SECOND);
    let later = changes(&world.tally("x").settings);
    let next = later.iter().find(|effect| **effect > before.effect_ns);
    let late_ns = next.expect("it changes") - (before.effect_ns + floor_ns);
    assert!(
        (0..SECOND).contains(&late_ns),
        "{late_ns} ns after the floor"
    );
}

#[test]
fn the_phase_error_is_brought_back_as_fast_as_the_pitch_may_change() {
    let fastest = |pitch_limit_ppm| {
        let mut world = facility(
            crystal(8e-6, 1e-11),
            CrossingDeclaration {
                headroom_samples: 40.0,
                pitch_limit_ppm,
                ..crossing("x", "desk", "house")
            },
        );
        world.run_until(HOUR);
        world.move_buffer("x", 90.0);
        let moved_to = world.phase("x");
        for _ in 0..3 {
            let level_samples = world.phase("x");
            world.apply(Event::Occupancy {
                crossing: id("x"),
                level_samples,
                deviation_samples: 0.05,
                house_ns: world.now,
            });
        }
        world.run_until(HOUR + 120 * SECOND);
        let moved = world
            .tally("x")
            .settings
            .iter()
            .filter(|s| s.decided_ns >= HOUR);
        let fastest = moved
            .map(|setting| (average(setting) / setting.evidence.target - 1.0).abs())
            .fold(0.0, f64::max);
        (fastest * 1e6, moved_to - world.phase("x"))
    };
    let (slow, back_slow) = fastest(2.0);
    let (quick, back_quick) = fastest(20.0);
    assert!(slow <= 2.0 + 1e-3, "{slow} ppm");
    assert!(quick > 2.5 && quick <= 20.0 + 1e-3, "{quick} ppm");
    // 2 ppm are 0.096 samples a second, for two minutes at most.
    let most = 0.096 * 120.0;
    assert!(
        (0.8 * most..=most).contains(&back_slow),
        "{back_slow} samples"
    );
    assert!(back_quick > 2.0 * back_slow, "{back_quick} samples");
}
