//! The operator's hand: pins, trials, and what is left of who did what.

mod world;

use ratewright_control::{
    Act, ActKind, CrossingDeclaration, CrossingState, CrossingStatus, Event, Reason, RefusalKind,
    Transition, explain,
};
use ratewright_ratio::Bounds;
use ratewright_timing::sim::{ClockModel, Delay, Disturbance, Upset};
use world::{HOUR, SECOND, World, clock, crossing, crystal, id};

const MICROSECOND: Delay = Delay::Normal { deviation_s: 1e-6 };

/// A desk whose drift jumps by 2 ppm after an hour, into the house.
fn facility(declaration: CrossingDeclaration) -> World {
    let upsets = vec![Upset {
        at_ns: HOUR,
        what: Disturbance::DriftJump(2e-6),
    }];
    let mut world = World::new();
    world.add_exact("house", 48_000);
    let model = ClockModel {
        upsets,
        ..crystal(8e-6, 1e-10)
    };
    world.add(clock("desk", 44_100), model, MICROSECOND, SECOND);
    world.cross(declaration);
    world
}

fn plain() -> CrossingDeclaration {
    CrossingDeclaration {
        review_horizon_ns: 60 * SECOND,
        ..crossing("x", "desk", "house")
    }
}

fn pin(crossing: &str) -> Event {
    Event::Pin {
        crossing: id(crossing),
        by: "night shift".into(),
        note: "on air".into(),
    }
}

fn release(crossing: &str) -> Event {
    Event::Release {
        crossing: id(crossing),
        by: "day shift".into(),
        note: String::new(),
    }
}

fn status(world: &World, name: &str) -> CrossingStatus {
    world
        .engine
        .status(&id(name), world.now)
        .expect("it was declared")
}

/// A refused event: the field, and that nothing changed.
fn refused(world: &mut World, event: &Event) -> (RefusalKind, String) {
    let before = world.engine.clone();
    let refusal = world
        .engine
        .apply(event, world.now)
        .expect_err("it is refused");
    assert!(world.engine == before, "a refused event changes nothing");
    (refusal.kind, refusal.field)
}

#[test]
fn a_pinned_crossing_runs_what_it_ran_and_forecasts_until_it_is_released() {
    let mut world = facility(plain());
    world.run_until(HOUR - 60 * SECOND);
    let effects = world.apply(pin("x"));
    assert_eq!(
        effects.acts,
        [Act {
            crossing: id("x"),
            by: "night shift".into(),
            note: "on air".into(),
            at_ns: HOUR - 60 * SECOND,
            what: ActKind::Pinned,
        }]
    );
    let pinned = status(&world, "x");
    let pin_shown = pinned.pin.expect("it is pinned");
    assert_eq!(
        (pin_shown.by.as_str(), pin_shown.since_ns),
        ("night shift", world.now)
    );
    let on_air = pinned.setting.expect("one runs");
    // It slips, and says so; only its expiry goes on.
    world.run_until(HOUR + 600 * SECOND);
    let settings = &world.tally("x").settings;
    let later = settings.iter().filter(|s| s.number > on_air.number);
    // Each at most a horizon, a lead and a step between decisions after the one before: 71 s.
    assert!(later.clone().count() >= 660 / 71, "renewals go on");
    for setting in later {
        assert_eq!(
            (setting.realised, setting.reason),
            (on_air.realised, Reason::Renewal)
        );
    }
    assert!(world.phase("x").abs() > 4.0);
    let slipped = status(&world, "x");
    assert_eq!(slipped.state, CrossingState::Degraded);
    assert_eq!(slipped.seconds_to_slip, Some(0.0));
    assert!(
        slipped.reason.starts_with("x is pinned by night shift"),
        "{}",
        slipped.reason
    );
    // Other bounds would change what runs; another name would not.
    let bounds = Bounds::new(512, 512).expect("in range");
    let narrower = Event::DeclareCrossing(CrossingDeclaration { bounds, ..plain() });
    assert_eq!(
        refused(&mut world, &narrower),
        (RefusalKind::Precondition, "crossing".into())
    );
    world.apply(Event::DeclareCrossing(CrossingDeclaration {
        display_name: "Desk".into(),
        ..plain()
    }));
    // No renewal is under way by then.
    world.run_until(HOUR + 603 * SECOND);
    let effects = world.apply(release("x"));
    assert_eq!(effects.acts[0].what, ActKind::Released);
    assert_eq!(effects.settings.len(), 1, "it is decided at once");
    assert_ne!(effects.settings[0].realised, on_air.realised);
    assert_eq!(status(&world, "x").pin, None);
}

#[test]
fn a_pin_on_one_keeps_its_whole_group() {
    let mut world = facility(CrossingDeclaration {
        group: Some(id("pair")),
        ..plain()
    });
    world.cross(CrossingDeclaration {
        id: id("y"),
        group: Some(id("pair")),
        ..plain()
    });
    world.run_until(HOUR - 60 * SECOND);
    world.apply(pin("x"));
    let before = world.tally("y").settings.len();
    let runs = world.tally("y").settings[before - 1].realised;
    world.run_until(HOUR + 600 * SECOND);
    assert!(
        world.tally("y").settings[before..]
            .iter()
            .all(|setting| setting.realised == runs)
    );
    let kept = status(&world, "y");
    assert!(kept.reason.contains("x is pinned by"), "{}", kept.reason);
    assert_eq!(kept.pin, None, "it is not pinned itself");
    world.apply(release("x"));
    for name in ["x", "y"] {
        let newest = world.tally(name).settings.last().expect("settings");
        assert_eq!(newest.decided_ns, world.now, "{name} changes at once");
    }
}

#[test]
fn a_hand_without_a_name_or_with_nothing_to_do_is_refused() {
    let mut world = facility(plain());
    world.run_until(10 * SECOND);
    let act = |by: &str, note: &str| Event::Pin {
        crossing: id("x"),
        by: by.into(),
        note: note.into(),
    };
    let (invalid, precondition) = (RefusalKind::Invalid, RefusalKind::Precondition);
    for (event, kind, field) in [
        (act("", ""), invalid, "by"),
        (act(&"b".repeat(129), ""), invalid, "by"),
        (act("me", &"n".repeat(513)), invalid, "note"),
        (release("x"), precondition, "crossing"),
        (pin("nothing"), RefusalKind::NotFound, "crossing"),
    ] {
        assert_eq!(refused(&mut world, &event), (kind, field.to_owned()));
    }
    world.apply(act(&"b".repeat(128), &"n".repeat(512)));
    assert_eq!(
        refused(&mut world, &pin("x")),
        (precondition, "crossing".into())
    );
}

#[test]
fn a_trial_decides_and_records_and_begins_anew_when_it_goes_on_air() {
    let trial = CrossingDeclaration {
        silent: true,
        ..plain()
    };
    let mut world = facility(trial);
    world.run_until(HOUR / 2);
    let settings = world.tally("x").settings.clone();
    assert!(settings.len() > 5 && settings.iter().all(|setting| setting.silent));
    let newest = settings.last().expect("settings").clone();
    let told = explain(&newest, world.engine.crossing(&id("x")).expect("declared"));
    assert_eq!(
        told.last().map(String::as_str),
        Some("It is a trial for the record: nobody is told of it.")
    );
    let applied = Event::Applied {
        crossing: id("x"),
        epoch: newest.epoch,
        number: newest.number,
        house_ns: world.now,
        sink_sample: 0,
    };
    let occupancy = Event::Occupancy {
        crossing: id("x"),
        level_samples: 0.0,
        deviation_samples: 0.1,
        house_ns: world.now,
    };
    for event in [applied, occupancy] {
        let precondition = (RefusalKind::Precondition, "crossing".to_owned());
        assert_eq!(refused(&mut world, &event), precondition);
    }
    let effects = world.apply(Event::DeclareCrossing(plain()));
    let on_air = &effects.settings[0];
    assert!(!on_air.silent);
    assert_eq!(
        (on_air.number, on_air.reason),
        (newest.number + 1, Reason::Declaration)
    );
    assert!(
        matches!(&effects.transitions[0], Transition::Centred { reason, .. } if reason.contains("no longer silent")),
        "{:?}",
        effects.transitions
    );
    assert_eq!(status(&world, "x").phase_error_samples, 0.0);
}
