//! The ways to make a wanted rate on average: one table of phases that is stepped through, and lazy
//! switching between two ratios.

mod world;

use num_rational::Ratio;
use ratewright_control::{
    CrossingDeclaration, CrossingState, CrossingStatus, Event, Realisation, Realised, Setting,
    explain,
};
use ratewright_ratio::{Bounds, Certificate, CertificateError, Lazy, target_from_f64};
use world::{HOUR, SECOND, World, crossing, desk_into_house, id};

fn way(realisation: Realisation, bound: u64, headroom_samples: f64) -> CrossingDeclaration {
    CrossingDeclaration {
        realisation,
        bounds: Bounds::new(bound, bound).expect("in range"),
        headroom_samples,
        ..crossing("x", "desk", "house")
    }
}

fn status(world: &World) -> CrossingStatus {
    world
        .engine
        .status(&id("x"), world.now)
        .expect("it was declared")
}

/// Runs six hours, of which all but the first are judged; gives the settings made in these.
fn holds(world: &mut World, headroom: f64) -> usize {
    world.run_until(HOUR);
    world.forget();
    world.run_until(6 * HOUR);
    let now = status(world);
    assert_eq!(now.state, CrossingState::Holding, "{}", now.reason);
    let tally = world.tally("x");
    assert!(tally.worst <= headroom, "worst {}", tally.worst);
    let bounds = world
        .engine
        .crossing(&id("x"))
        .expect("it was declared")
        .bounds;
    for setting in &tally.settings {
        setting.verify(&bounds).expect("its certificate proves it");
    }
    let later = tally.settings.iter().filter(|s| s.decided_ns > HOUR);
    later.count()
}

#[test]
fn stepping_holds_equal_rates_within_half_a_sample_for_hours() {
    for drift in [5e-6, -37.3e-6] {
        let mut world = desk_into_house(drift, 48_000, way(Realisation::Stepping, 1024, 0.5));
        let settings = holds(&mut world, 0.5);
        assert!(settings <= 50, "{settings} settings in five hours");
        let newest = status(&world).setting.expect("settings were made");
        let Realised::Stepping(stepping) = newest.realised else {
            panic!("a table of phases is stepped through")
        };
        // Half a phase of a table of 1024: far less than the half sample of a cadence beside 1/1.
        assert_eq!(stepping.phases(), 1024);
        assert_eq!(stepping.wanted(), ratewright_ratio::exact(&newest.wanted));
        let declaration = world.engine.crossing(&id("x")).expect("it was declared");
        let told = explain(&newest, declaration);
        let (short, long) = stepping.advances();
        assert!(
            told[0].contains(&format!(
                "step through its 1024 phases by {short} or {long} for each output"
            )),
            "{}",
            told[0]
        );
        assert!(
            told.iter()
                .any(|line| line.contains("a table of 1024 phases")),
            "{told:?}"
        );
    }
}

#[test]
fn a_short_table_is_out_of_bounds_and_says_how_many_phases_would_do() {
    // Two phases: half a phase and half a phase carried over are half a sample.
    let mut world = desk_into_house(5e-6, 48_000, way(Realisation::Stepping, 2, 0.5));
    world.run_until(HOUR / 2);
    let now = status(&world);
    assert_eq!(now.state, CrossingState::OutOfBounds, "{}", now.reason);
    let needed = now.needed.expect("a longer table would do");
    assert_eq!(needed.max_l(), 3, "{}", now.reason);
    // Eight times as many samples as there are come out of no table of four phases.
    let mut world = desk_into_house(5e-6, 6_000, way(Realisation::Stepping, 4, 4.0));
    world.run_until(HOUR / 2);
    let now = status(&world);
    assert_eq!(now.state, CrossingState::OutOfBounds, "{}", now.reason);
    let newest = now.setting.expect("there is always one");
    assert_eq!(newest.average(), Ratio::from_integer(4), "the least bad");
    assert_eq!(now.needed.map(|needed| needed.max_l()), Some(8));
}

#[test]
fn exact_clocks_are_stepped_through_exactly() {
    let mut world = World::new();
    world.add_exact("desk", 44_100);
    world.add_exact("house", 48_000);
    world.cross(way(Realisation::Stepping, 320, 0.5));
    let newest = status(&world).setting.expect("one is there at once");
    let Realised::Stepping(stepping) = newest.realised else {
        panic!("a table of phases is stepped through")
    };
    // 320 phases at 160/147: two at a time would be 160, and 294 of them are one exact advance.
    assert_eq!(stepping.advances(), (294, 294));
    assert_eq!((newest.residual, newest.seconds_to_slip), (0.0, None));
}

#[test]
fn lazy_switching_takes_few_changes_and_stays_within_its_swing() {
    let mut world = desk_into_house(37.3e-6, 48_000, way(Realisation::Lazy, 1024, 16.0));
    let settings = holds(&mut world, 16.0);
    assert!(settings <= 20, "{settings} settings in five hours");
    let newest = status(&world).setting.expect("settings were made");
    let Realised::Lazy {
        cadence,
        swing_samples,
    } = newest.realised
    else {
        panic!("two ratios are held in turn")
    };
    assert_eq!(swing_samples, 4.0, "a quarter of the headroom");
    let swing = target_from_f64(swing_samples).expect("a positive number");
    let lazy = Lazy::new(cadence, &swing).expect("the swing is wide enough for the pair");
    let (lazy, balanced) = (
        lazy.switches_per_second(48_000.0),
        cadence.switches_per_second(48_000.0),
    );
    assert!(lazy < balanced / 3.0, "{lazy} against {balanced} a second");
    let declaration = world.engine.crossing(&id("x")).expect("it was declared");
    let told = explain(&newest, declaration);
    assert!(told[0].contains("would leave ±4 samples"), "{}", told[0]);
}

#[test]
fn a_lazy_swing_is_at_least_what_the_pair_needs() {
    // A quarter of one sample is less than the half that a block beside 1/1 takes.
    let mut world = desk_into_house(37.3e-6, 48_000, way(Realisation::Lazy, 1024, 1.0));
    world.run_until(HOUR);
    let newest = status(&world).setting.expect("settings were made");
    let Realised::Lazy {
        cadence,
        swing_samples,
    } = newest.realised
    else {
        panic!("two ratios are held in turn")
    };
    let swing = target_from_f64(swing_samples).expect("a positive number");
    Lazy::new(cadence, &swing).expect("the swing is wide enough for the pair");
}

#[test]
fn a_setting_does_not_verify_for_another_table_or_with_another_proof() {
    let mut world = desk_into_house(5e-6, 48_000, way(Realisation::Stepping, 1024, 0.5));
    world.run_until(60 * SECOND);
    let setting = status(&world).setting.expect("settings were made");
    let other = Bounds::new(512, 1024).expect("in range");
    assert!(matches!(
        setting.verify(&other),
        Err(CertificateError::OutsideRegion(_))
    ));
    let own = Bounds::new(1024, 1024).expect("in range");
    let mut forged = setting.clone();
    forged.wanted = Ratio::new(3, 4);
    assert!(matches!(
        forged.verify(&own),
        Err(CertificateError::OtherAnswer { .. })
    ));
    let mut forged = setting;
    if let Certificate::SteppingPair(pair) = &mut forged.certificate {
        pair.advance += 1;
    }
    assert!(matches!(
        forged.verify(&own),
        Err(CertificateError::OtherAnswer { .. })
    ));
}

/// Runs what the settings say, so many steps of each, with the running error carried over, and
/// gives the largest one there was.
fn largest_running_error(settings: &[Setting], steps: usize) -> f64 {
    let size = |error: Ratio<i128>| (*error.numer() as f64 / *error.denom() as f64).abs();
    let (mut error, mut largest) = (Ratio::from_integer(0), 0.0_f64);
    let carried = "what is carried is within what the one before may err by";
    for setting in settings {
        match setting.realised {
            Realised::Single(_) => {}
            Realised::Cadence(cadence) => {
                let mut state = cadence.start_from(error).expect(carried);
                for _ in 0..steps {
                    state.next_block();
                    largest = largest.max(size(state.error_outputs()));
                }
                error = state.error_outputs();
            }
            Realised::Stepping(stepping) => {
                // One exact advance moves no error: it stays as it is.
                let is_exact = stepping.advances().0 == stepping.advances().1;
                let (mut state, kept) = if is_exact {
                    (stepping.start(), error)
                } else {
                    let state = stepping.start_from(error).expect(carried);
                    (state, Ratio::from_integer(0))
                };
                for _ in 0..steps {
                    state.next_output();
                    largest = largest.max(size(kept + state.error_outputs()));
                }
                error = kept + state.error_outputs();
            }
            Realised::Lazy {
                cadence,
                swing_samples,
            } => {
                let swing = target_from_f64(swing_samples).expect("a positive number");
                let lazy = Lazy::new(cadence, &swing).expect("wide enough for the pair");
                let mut state = lazy.start_from(error).expect(carried);
                for _ in 0..steps {
                    state.next_block();
                    largest = largest.max(size(state.error_outputs()));
                }
                error = state.error_outputs();
            }
        }
    }
    largest
}

#[test]
fn what_is_run_errs_by_no_more_than_the_tube_leaves_for_it() {
    // From setting to setting, as a follower runs them: half a phase and half a phase carried
    // over, the swing, or half a block; and what is rounded when it is carried over.
    for (realisation, bound, headroom, budget) in [
        (Realisation::Stepping, 16, 0.5, 1.0001 / 16.0),
        (Realisation::Stepping, 1024, 0.5, 1.0001 / 1024.0),
        (Realisation::Lazy, 1024, 16.0, 4.0013),
        (Realisation::Cadence, 1024, 4.0, 0.5013),
    ] {
        let mut world = desk_into_house(37.3e-6, 48_000, way(realisation, bound, headroom));
        world.run_until(5 * HOUR);
        let settings = &world.tally("x").settings;
        assert!(settings.len() > 8, "{} settings", settings.len());
        let largest = largest_running_error(settings, 4_000);
        assert!(
            largest <= budget,
            "{realisation:?} within {bound}: {largest} of {budget}"
        );
        assert!(
            largest > 0.3 * budget,
            "{realisation:?} within {bound}: {largest} of {budget} is no test"
        );
    }
}

#[test]
fn a_single_ratio_keeps_what_a_running_error_left_to_it() {
    // A cadence beside 1/1 may be half a sample off when 1/1 takes over, and stay so.
    let mut world = desk_into_house(37.3e-6, 48_000, way(Realisation::Cadence, 1024, 4.0));
    world.run_until(HOUR);
    let before = status(&world).phase_deviation_samples;
    let single = way(Realisation::Single, 1024, 4.0);
    world.apply(Event::DeclareCrossing(single.clone()));
    let after = status(&world);
    let taken_over = after.setting.expect("one is there").realised;
    assert!(matches!(taken_over, Realised::Single(_)));
    // Anywhere within ±0.5013.
    let left = after.phase_deviation_samples.powi(2) - before.powi(2);
    assert!((left - 0.5013 * 0.5013 / 3.0).abs() < 1e-3, "{left}");
    // What makes it on average again brings it within its own error.
    let stepping = way(Realisation::Stepping, 1024, 4.0);
    world.apply(Event::DeclareCrossing(stepping));
    let after = status(&world).phase_deviation_samples;
    assert!((after - before).abs() < 1e-3, "{before} and then {after}");
}
