//! Resamplers that run at one ratio at a time, and exact clocks.

mod world;

use num_rational::Ratio;
use ratewright_control::{CrossingDeclaration, CrossingState, Realisation, Realised, Reason};
use ratewright_ratio::Bounds;
use world::{HOUR, SECOND, World, crossing, desk_into_house, id};

fn single(max: u64, headroom_samples: f64) -> CrossingDeclaration {
    let bounds = Bounds::new(max, max).expect("in range");
    let realisation = Realisation::Single;
    CrossingDeclaration {
        bounds,
        realisation,
        headroom_samples,
        ..crossing("x", "desk", "house")
    }
}

#[test]
fn wide_bounds_hold_with_single_ratios() {
    let mut world = desk_into_house(-8e-6, 44_100, single(200_000, 4.0));
    world.run_until(HOUR);
    world.forget();
    world.run_until(3 * HOUR);
    let tally = world.tally("x");
    assert!(tally.worst <= 4.0, "worst {}", tally.worst);
    assert!(
        tally
            .settings
            .iter()
            .all(|s| matches!(s.realised, Realised::Single(_)))
    );
    assert!(
        tally.settings.len() < 60,
        "{} settings",
        tally.settings.len()
    );
}

#[test]
fn narrow_bounds_switch_lazily_between_ratios() {
    let mut world = desk_into_house(2e-6, 44_100, single(1024, 24.0));
    world.run_until(HOUR);
    world.forget();
    world.run_until(2 * HOUR);
    let (tally, bounds) = (world.tally("x"), Bounds::new(1024, 1024).expect("in range"));
    assert!(tally.worst <= 24.0, "worst {}", tally.worst);
    for setting in &tally.settings {
        let Realised::Single(ratio) = setting.realised else {
            panic!("one ratio at a time")
        };
        assert!(bounds.allow(&ratio));
        setting
            .verify(&bounds)
            .expect("every certificate proves its setting");
    }
}

#[test]
fn a_gap_too_wide_for_single_ratios_is_out_of_bounds_and_forecast() {
    let mut world = desk_into_house(0.5e-6, 48_000, single(1024, 4.0));
    world.run_until(80 * SECOND);
    let status = world
        .engine
        .status(&id("x"), world.now)
        .expect("it was declared");
    assert_eq!(
        status.state,
        CrossingState::OutOfBounds,
        "{}",
        status.reason
    );
    assert!(
        status.reason.contains("that would take L up to"),
        "{}",
        status.reason
    );
    let newest = status.setting.as_ref().expect("there is always a setting");
    assert_eq!(newest.realised, Realised::Single(Ratio::new(1, 1)));
    // 1/1 makes 0.5 ppm of 48,000 samples a second too much: 0.024/s.
    assert!(
        (status.target - 1.0 + 0.5e-6).abs() < 1e-7,
        "{}",
        status.target
    );
    let expected = (4.0 - world.phase("x")) / 0.024;
    let forecast = status.seconds_to_slip.expect("it slips soon");
    assert!(
        (forecast - expected).abs() < 0.3 * expected,
        "{forecast} for {expected}"
    );
    // And it is right: the account says so when it happens.
    world.run_until(80 * SECOND + (1.5 * expected * 1e9) as i64);
    let status = world
        .engine
        .status(&id("x"), world.now)
        .expect("it was declared");
    assert!(world.phase("x") > 4.0 && status.phase_error_samples > 4.0);
    assert_eq!(
        (status.state, status.seconds_to_slip),
        (CrossingState::OutOfBounds, Some(0.0))
    );
}

#[test]
fn exact_clocks_never_slip_and_are_only_confirmed() {
    let mut world = World::new();
    world.add_exact("disc", 44_100);
    world.add_exact("house", 48_000);
    world.cross(CrossingDeclaration {
        source: id("disc"),
        ..single(256, 0.5)
    });
    world.run_until(5 * HOUR);
    let tally = world.tally("x");
    let ratio = Ratio::new(160, 147);
    for setting in &tally.settings {
        assert_eq!(
            (setting.wanted, setting.realised),
            (ratio, Realised::Single(ratio))
        );
        assert_eq!((setting.residual, setting.seconds_to_slip), (0.0, None));
    }
    let reasons: Vec<Reason> = tally.settings.iter().map(|s| s.reason).collect();
    assert_eq!(
        reasons,
        [
            Reason::First,
            Reason::Renewal,
            Reason::Renewal,
            Reason::Renewal,
            Reason::Renewal
        ]
    );
    assert_eq!((tally.changes.len(), tally.worst < 1e-6), (1, true));
}

#[test]
fn exact_clocks_whose_ratio_the_bounds_cannot_make_get_its_cadence() {
    let mut world = World::new();
    world.add_exact("disc", 44_100);
    let mut pulled = world::exact_clock("house", 48_000);
    pulled.nominal_hz = Ratio::new(48_000_000, 1001);
    world.apply(ratewright_control::Event::DeclareClock(pulled));
    let declaration = CrossingDeclaration {
        source: id("disc"),
        ..crossing("x", "desk", "house")
    };
    let effects = world.apply(ratewright_control::Event::DeclareCrossing(declaration));
    let setting = &effects.settings[0];
    assert_eq!(setting.wanted, Ratio::new(160_000, 147_147));
    assert_eq!((setting.residual, setting.seconds_to_slip), (0.0, None));
    assert!(matches!(setting.realised, Realised::Cadence(_)));
}
