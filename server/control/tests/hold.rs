//! Long holds: hours of simulated time in which no buffer may slip, with few settings.

mod world;

use ratewright_control::{CrossingDeclaration, CrossingState, Realised};
use ratewright_timing::sim::Delay;
use world::{HOUR, SECOND, World, clock, crossing, crystal, id};

struct Case {
    source_hz: u64,
    drift: f64,
    headroom: f64,
    noise_s: f64,
    /// Most settings in the hours after the first.
    most_settings: usize,
}

const HOURS: i64 = 6;

fn run(case: &Case) -> World {
    let mut world = World::new();
    world.add_exact("house", 48_000);
    let delay = Delay::Normal {
        deviation_s: case.noise_s,
    };
    world.add(
        clock("desk", case.source_hz),
        crystal(case.drift, 1e-10),
        delay,
        SECOND,
    );
    world.cross(CrossingDeclaration {
        headroom_samples: case.headroom,
        ..crossing("x", "desk", "house")
    });
    world.run_until(HOUR);
    world.forget();
    world.run_until(HOURS * HOUR);
    world
}

fn check(case: &Case) {
    let world = run(case);
    let tally = world.tally("x");
    let what = format!(
        "{} Hz, {:+} ppm, headroom {}",
        case.source_hz,
        case.drift * 1e6,
        case.headroom
    );
    assert!(
        tally.worst <= case.headroom,
        "{what}: worst {}",
        tally.worst
    );
    let later = tally
        .settings
        .iter()
        .filter(|s| s.decided_ns > HOUR)
        .count();
    assert!(later <= case.most_settings, "{what}: {later} settings");
    let status = world
        .engine
        .status(&id("x"), world.now)
        .expect("it was declared");
    assert_eq!(
        status.state,
        CrossingState::Holding,
        "{what}: {}",
        status.reason
    );
    let five_deviations = 5.0 * status.phase_deviation_samples;
    assert!(
        tally.worst_account <= five_deviations,
        "{what}: account off by {}",
        tally.worst_account
    );
    let bounds = world
        .engine
        .crossing(&id("x"))
        .expect("it was declared")
        .bounds;
    for setting in &tally.settings {
        setting
            .verify(&bounds)
            .expect("every certificate proves its setting");
        assert!(setting.evidence.target_low <= setting.evidence.target_high);
    }
}

#[test]
fn cd_rate_into_studio_rate_with_room_needs_a_setting_each_quarter_hour() {
    for drift in [37.3e-6, -37.3e-6, 2e-6] {
        check(&Case {
            source_hz: 44_100,
            drift,
            headroom: 4.0,
            noise_s: 1e-6,
            most_settings: 25,
        });
    }
}

#[test]
fn cd_rate_into_studio_rate_holds_half_a_sample() {
    for drift in [2e-6, -37.3e-6] {
        check(&Case {
            source_hz: 44_100,
            drift,
            headroom: 0.5,
            noise_s: 1e-6,
            most_settings: 50,
        });
    }
}

#[test]
fn equal_rates_are_held_by_a_cadence_around_one() {
    let case = Case {
        source_hz: 48_000,
        drift: 37.3e-6,
        headroom: 4.0,
        noise_s: 5e-6,
        most_settings: 30,
    };
    check(&case);
    let world = run(&case);
    let newest = world
        .tally("x")
        .settings
        .last()
        .expect("settings were made");
    let Realised::Cadence(cadence) = newest.realised else {
        panic!("1024/1024 cannot do it alone")
    };
    // The source runs fast, so the target is below one.
    assert_eq!(
        (cadence.low().to_string(), cadence.high().to_string()),
        ("1023/1024".into(), "1".into())
    );
}

#[test]
fn a_cadence_of_equal_rates_within_half_a_sample_is_out_of_bounds_and_says_what_would_do() {
    let mut world = World::new();
    world.add_exact("house", 48_000);
    world.add(
        clock("desk", 48_000),
        crystal(5e-6, 1e-10),
        Delay::Normal { deviation_s: 1e-6 },
        SECOND,
    );
    world.cross(CrossingDeclaration {
        headroom_samples: 0.5,
        ..crossing("x", "desk", "house")
    });
    world.run_until(HOUR / 2);
    let status = world
        .engine
        .status(&id("x"), world.now)
        .expect("it was declared");
    assert_eq!(status.state, CrossingState::OutOfBounds);
    assert!(
        status
            .reason
            .contains("what can be run within the bounds errs by up to 0.501"),
        "{}",
        status.reason
    );
    // Next to 1/1 everything errs by half a sample, so 1/1 has to be no neighbour any more: the
    // target is 5 ppm from it, less the 0.07 ppm that bring 0.4 samples back in two minutes.
    let needed = status.needed.expect("wider bounds would do");
    let expected = 1e6 / (5.0 - 0.4 / 120.0 / 0.048);
    for parts in [needed.max_l(), needed.max_m()] {
        assert!((parts as f64 / expected - 1.0).abs() < 0.01, "{needed:?}");
    }
    assert!(
        status
            .reason
            .contains(&format!("M up to {}", needed.max_m()))
    );
    // The least bad: the average is held all the same, and with few settings.
    assert!(status.phase_error_samples.abs() < 0.4);
    let early = |s: &&ratewright_control::Setting| s.decided_ns < HOUR / 6;
    let settings = &world.tally("x").settings;
    let (all, early) = (settings.len(), settings.iter().filter(early).count());
    assert!(
        all - early < 20,
        "{all} settings in half an hour, {early} early"
    );
    // With what would do it holds.
    world.cross(CrossingDeclaration {
        headroom_samples: 0.5,
        bounds: needed,
        ..crossing("x", "desk", "house")
    });
    world.run_until(HOUR / 2 + 30 * SECOND);
    let status = world
        .engine
        .status(&id("x"), world.now)
        .expect("it was declared");
    assert_eq!(
        (status.state, status.needed),
        (CrossingState::Holding, None),
        "{}",
        status.reason
    );
}

#[test]
fn a_pair_of_drifting_clocks_is_held() {
    let mut world = World::new();
    let delay = Delay::Normal { deviation_s: 2e-6 };
    world.add(clock("desk", 44_100), crystal(12e-6, 1e-10), delay, SECOND);
    world.add(clock("wall", 96_000), crystal(-21e-6, 1e-10), delay, SECOND);
    world.cross(crossing("x", "desk", "wall"));
    world.run_until(HOUR / 2);
    world.forget();
    world.run_until(4 * HOUR);
    assert!(
        world.tally("x").worst <= 4.0,
        "worst {}",
        world.tally("x").worst
    );
}
