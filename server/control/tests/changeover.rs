//! Another source, another rate, other clocks: what becomes of the account and the numbering.

mod world;

use num_rational::Ratio;
use ratewright_control::{
    ActKind, CrossingDeclaration, CrossingState, CrossingStatus, Effects, Event, Reason,
    RefusalKind, Transition, explain,
};
use ratewright_timing::sim::Delay;
use world::{HOUR, SECOND, World, clock, crossing, crystal, id};

const MICROSECOND: Delay = Delay::Normal { deviation_s: 1e-6 };

/// A main and a spare source, and one of another rate, all of them read, into the house.
fn facility() -> World {
    let mut world = World::new();
    world.add_exact("house", 48_000);
    for (name, hz, drift) in [
        ("main", 44_100, 8e-6),
        ("spare", 44_100, -11e-6),
        ("film", 48_000, 3e-6),
    ] {
        world.add(clock(name, hz), crystal(drift, 1e-10), MICROSECOND, SECOND);
    }
    world
}

fn with_backup(backup: &str) -> CrossingDeclaration {
    CrossingDeclaration {
        backup: Some(id(backup)),
        ..crossing("x", "main", "house")
    }
}

fn over_to(source: &str) -> Event {
    Event::ChangeOver {
        crossing: id("x"),
        source: id(source),
        by: "duty engineer".into(),
        note: "main lost its clock".into(),
    }
}

fn change_over(world: &mut World, source: &str) -> Effects {
    world.comes_from("x", source);
    world.apply(over_to(source))
}

fn status(world: &World) -> CrossingStatus {
    world
        .engine
        .status(&id("x"), world.now)
        .expect("it was declared")
}

fn centred(effects: &Effects) -> Option<&str> {
    effects
        .transitions
        .iter()
        .find_map(|transition| match transition {
            Transition::Centred { reason, .. } => Some(reason.as_str()),
            _ => None,
        })
}

#[test]
fn a_spare_of_the_same_rate_takes_over_with_the_account() {
    let mut world = facility();
    world.cross(with_backup("spare"));
    world.run_until(HOUR);
    let before = status(&world);
    assert_eq!(before.source, id("main"));
    let effects = change_over(&mut world, "spare");
    assert_eq!(
        effects.acts[0].what,
        ActKind::ChangedOver {
            from: id("main"),
            to: id("spare")
        }
    );
    assert_eq!(centred(&effects), None, "nothing begins anew");
    let after = status(&world);
    assert_eq!(after.source, id("spare"));
    assert!((after.phase_error_samples - before.phase_error_samples).abs() < 1e-9);
    assert!(after.phase_deviation_samples >= before.phase_deviation_samples - 1e-9);
    // 19 ppm apart: another setting is due in no time, under the next number.
    world.run_until(HOUR + 10 * SECOND);
    let last = before.setting.expect("settings were made").number;
    let mut later = world.tally("x").settings.iter().filter(|s| s.number > last);
    let made = later.next().expect("the ratio no longer suits");
    assert_eq!((made.number, made.on_backup), (last + 1, true));
    let declared = world.engine.crossing(&id("x")).expect("it was declared");
    let told = explain(made, declared).join("\n");
    assert!(told.contains("spare, the backup source, was -1"), "{told}");
    world.forget();
    world.run_until(3 * HOUR);
    let tally = world.tally("x");
    assert!(tally.worst <= 4.0, "worst {}", tally.worst);
    let later = status(&world);
    assert_eq!(later.state, CrossingState::Holding, "{}", later.reason);
    assert!(tally.worst_account < 5.0 * later.phase_deviation_samples);
    // And back.
    change_over(&mut world, "main");
    assert_eq!(status(&world).source, id("main"));
    world.run_until(4 * HOUR);
    assert!(world.tally("x").worst <= 4.0);
}

#[test]
fn a_setting_under_way_for_the_other_source_is_replaced() {
    let mut world = facility();
    world.cross(CrossingDeclaration {
        lead_ns: 5 * SECOND,
        ..with_backup("spare")
    });
    world.run_until(HOUR);
    change_over(&mut world, "spare");
    let made = |world: &World| world.tally("x").settings.len();
    let before = made(&world);
    while made(&world) == before {
        world.run_until(world.now + SECOND / 2);
    }
    let effects = change_over(&mut world, "main");
    let made = &effects.settings[0];
    assert_eq!(
        (made.reason, made.on_backup),
        (Reason::ChangeOver, false),
        "the one before is not in force yet"
    );
}

#[test]
fn a_source_of_another_rate_begins_anew_and_keeps_the_numbering() {
    let mut world = facility();
    world.cross(with_backup("film"));
    world.run_until(HOUR);
    let last = status(&world).setting.expect("settings were made").number;
    let effects = change_over(&mut world, "film");
    let why = centred(&effects).expect("44.1 kHz is not 48 kHz");
    assert!(why.contains("film"), "{why}");
    let made = &effects.settings[0];
    assert_eq!((made.number, made.reason), (last + 1, Reason::ChangeOver));
    assert!((world::average(made) - 1.0).abs() < 1e-4);
    // What ran until its effect made thousands of samples too many, which nobody can use: the
    // account begins with the effect, and is told to begin anew but once.
    let effect_ns = made.effect_ns;
    world.run_until(effect_ns);
    let (at_effect, of_account) = (world.phase("x"), status(&world).phase_error_samples);
    assert!(
        at_effect > 4000.0 && of_account == 0.0,
        "{at_effect} {of_account}"
    );
    world.run_until(effect_ns + 120 * SECOND);
    let later = status(&world);
    let off = later.phase_error_samples - (world.phase("x") - at_effect);
    assert!(off.abs() < 5.0 * later.phase_deviation_samples, "{off}");
    assert_eq!(later.state, CrossingState::Holding, "{}", later.reason);
    let told = world.transitions.iter();
    let centred_since = told.filter(|(_, t)| matches!(t, Transition::Centred { .. }));
    assert_eq!(centred_since.count(), 1);
    // Its follower may still say when it had applied the one before.
    world.apply(Event::Applied {
        crossing: id("x"),
        epoch: 1,
        number: last,
        house_ns: HOUR,
        sink_sample: 0,
    });
    assert_eq!(
        status(&world).phase_error_samples,
        later.phase_error_samples
    );
    // The main source may change its rate meanwhile: it is not in use.
    let faster = clock("main", 96_000);
    let effects = world.apply(Event::DeclareClock(faster));
    assert_eq!((centred(&effects), effects.settings.len()), (None, 0));
}

#[test]
fn an_impossible_changeover_is_refused() {
    let mut world = facility();
    world.cross(with_backup("spare"));
    world.cross(CrossingDeclaration {
        id: id("y"),
        ..crossing("x", "main", "house")
    });
    world.run_until(10 * SECOND);
    let mut refused = |event: Event| {
        let before = world.engine.clone();
        let refusal = world.engine.apply(&event, world.now).expect_err("refused");
        assert!(world.engine == before);
        (refusal.kind, refusal.field)
    };
    let (invalid, precondition) = (RefusalKind::Invalid, RefusalKind::Precondition);
    assert_eq!(refused(over_to("main")), (precondition, "source".into()));
    assert_eq!(refused(over_to("film")), (invalid, "source".into()));
    let without = Event::ChangeOver {
        crossing: id("y"),
        source: id("spare"),
        by: "me".into(),
        note: String::new(),
    };
    assert_eq!(refused(without), (precondition, "crossing".into()));
    let spare = Event::DeleteClock(id("spare"));
    assert_eq!(refused(spare), (precondition, "clock".into()));
    for backup in ["main", "house"] {
        let same = Event::DeclareCrossing(with_backup(backup));
        assert_eq!(refused(same), (invalid, "backup".into()));
    }
    let unknown = Event::DeclareCrossing(with_backup("nothing"));
    assert_eq!(refused(unknown), (RefusalKind::NotFound, "backup".into()));
    let pin = Event::Pin {
        crossing: id("x"),
        by: "me".into(),
        note: String::new(),
    };
    world.apply(pin);
    let refusal = world
        .engine
        .apply(&over_to("spare"), world.now)
        .expect_err("it is pinned");
    assert_eq!(refusal.field, "crossing");
}

#[test]
fn other_clocks_begin_anew_with_a_transition_and_keep_the_numbering() {
    let mut world = facility();
    world.cross(with_backup("spare"));
    world.run_until(HOUR);
    let last = status(&world).setting.expect("settings were made").number;
    let other = CrossingDeclaration {
        source: id("film"),
        ..crossing("x", "main", "house")
    };
    let effects = world.apply(Event::DeclareCrossing(other));
    assert!(centred(&effects).is_some_and(|why| why.contains("other clocks")));
    let made = &effects.settings[0];
    assert_eq!((made.number, made.reason), (last + 1, Reason::Declaration));
}

#[test]
fn a_declaration_that_swaps_the_sources_changes_nothing_of_the_account() {
    let mut world = facility();
    world.cross(with_backup("spare"));
    world.run_until(HOUR);
    change_over(&mut world, "spare");
    let before = status(&world).phase_error_samples;
    let swapped = CrossingDeclaration {
        source: id("spare"),
        backup: Some(id("main")),
        ..crossing("x", "main", "house")
    };
    let effects = world.apply(Event::DeclareCrossing(swapped));
    assert_eq!(centred(&effects), None);
    let after = status(&world);
    assert_eq!(after.source, id("spare"));
    assert!((after.phase_error_samples - before).abs() < 1e-9);
}

#[test]
fn a_device_that_is_switched_to_another_rate_keeps_the_numbering() {
    let mut world = facility();
    world.cross(crossing("x", "main", "house"));
    world.run_until(HOUR);
    let last = status(&world).setting.expect("settings were made").number;
    let effects = world.apply(Event::DeclareClock(clock("main", 48_000)));
    assert!(centred(&effects).is_some_and(|why| why.contains("main was declared anew")));
    let made = &effects.settings[0];
    assert_eq!((made.number, made.reason), (last + 1, Reason::Declaration));
    assert_eq!(made.average(), Ratio::from_integer(1));
}
