//! What happens in a facility: outages, steps, late followers, moved buffers, groups.

mod world;

use ratewright_control::{
    CrossingDeclaration, CrossingState, Event, Reason, Setting, Transition, explain,
};
use ratewright_timing::sim::{ClockModel, Delay, Disturbance, Upset};
use ratewright_timing::{Measurement, State};
use world::{DAY, HOUR, SECOND, World, clock, crossing, crystal, id};

const MICROSECOND: Delay = Delay::Normal { deviation_s: 1e-6 };

fn facility(model: ClockModel) -> World {
    let mut world = World::new();
    world.add_exact("house", 48_000);
    world.add(clock("desk", 44_100), model, MICROSECOND, SECOND);
    world.cross(crossing("x", "desk", "house"));
    world
}

#[test]
fn a_setting_exists_at_once_and_the_crossing_waits() {
    let mut world = World::new();
    world.add_exact("house", 48_000);
    world.add(
        clock("desk", 44_100),
        crystal(0.0, 0.0),
        Delay::None,
        i64::MAX,
    );
    world.cross(crossing("x", "desk", "house"));
    let status = world.engine.status(&id("x"), 0).expect("it was declared");
    assert_eq!(status.state, CrossingState::Waiting);
    assert_eq!(status.reason, "the source desk was never measured");
    let first = status.setting.expect("it exists at once");
    assert_eq!(
        (first.number, first.reason, first.effect_ns),
        (1, Reason::First, SECOND)
    );
    assert_eq!(first.average().to_string(), "160/147");
    // ±100 ppm is common practice for a clock of which nothing is declared.
    let half_width = first.evidence.target_high / first.evidence.target - 1.0;
    assert!((half_width - 100e-6).abs() < 1e-7, "{half_width}");
    // In the worst case 100 ppm of 48,000 samples a second: four samples are gone in 0.83 s.
    let slip = first.seconds_to_slip.expect("it may slip");
    assert!((slip - 4.0 / 4.8).abs() < 0.05, "{slip}");
    world.run_until(3 * HOUR);
    assert!(
        world.tally("x").settings[1..]
            .iter()
            .all(|s| s.reason == Reason::Renewal)
    );
}

#[test]
fn a_day_without_readings_is_bridged_and_the_ledger_knows_what_became_of_it() {
    let mut world = facility(crystal(8e-6, 1e-10));
    world.run_until(4 * HOUR);
    world.silence("desk", 4 * HOUR, 4 * HOUR + DAY);
    world.run_until(4 * HOUR + DAY - SECOND);
    let lost = world.transitions.iter().any(|(at, t)| {
        *at > 4 * HOUR
            && matches!(
                t,
                Transition::Clock {
                    to: State::Holdover,
                    ..
                }
            )
    });
    assert!(lost, "the clock goes to holdover");
    let status = world
        .engine
        .status(&id("x"), world.now)
        .expect("it was declared");
    assert!(
        status.phase_deviation_samples > 4.0,
        "{}",
        status.phase_deviation_samples
    );
    let off = (status.phase_error_samples - world.phase("x")).abs();
    assert!(off < 4.0 * status.phase_deviation_samples, "{off}");
    // Back again: the counter has counted on, so the ledger learns the true phase error, and the
    // policy brings it back.
    world.run_until(4 * HOUR + DAY + HOUR);
    let status = world
        .engine
        .status(&id("x"), world.now)
        .expect("it was declared");
    let off = (status.phase_error_samples - world.phase("x")).abs();
    assert!(off < 0.5, "account off by {off}");
    assert_eq!(status.state, CrossingState::Holding, "{}", status.reason);
    world.forget();
    world.run_until(4 * HOUR + DAY + 3 * HOUR);
    assert!(world.tally("x").worst <= 4.0);
}

#[test]
fn a_jump_of_the_drift_is_followed_and_brought_back() {
    let upsets = vec![Upset {
        at_ns: 2 * HOUR,
        what: Disturbance::DriftJump(3e-6),
    }];
    let mut world = facility(ClockModel {
        upsets,
        ..crystal(8e-6, 1e-10)
    });
    world.run_until(2 * HOUR);
    world.forget();
    world.run_until(2 * HOUR + HOUR / 2);
    // 3 ppm are 0.144 samples a second; what was missed until the jump was found comes back.
    assert!(
        world.tally("x").worst < 12.0,
        "worst {}",
        world.tally("x").worst
    );
    world.forget();
    world.run_until(3 * HOUR);
    assert!(
        world.tally("x").worst <= 4.0,
        "worst {}",
        world.tally("x").worst
    );
    let status = world
        .engine
        .status(&id("x"), world.now)
        .expect("it was declared");
    assert_eq!(status.state, CrossingState::Holding);
}

#[test]
fn a_late_follower_is_integrated_as_it_truly_was() {
    let run = |reports: bool| {
        let mut world = facility(crystal(30e-6, 1e-10));
        world.follow_late("x", 2 * SECOND, reports);
        world.run_until(HOUR);
        let status = world
            .engine
            .status(&id("x"), world.now)
            .expect("it was declared");
        (status.phase_error_samples - world.phase("x")).abs()
    };
    assert!(run(true) < 0.4, "reported: off by {}", run(true));
    assert!(
        run(false) > 1.0,
        "unreported lateness goes unseen: {}",
        run(false)
    );
}

#[test]
fn a_moved_buffer_is_found_by_its_occupancy() {
    let mut world = facility(crystal(8e-6, 1e-10));
    world.run_until(HOUR);
    world.move_buffer("x", 6.0);
    for _ in 0..3 {
        world.run_until(world.now + 10 * SECOND);
        let level_samples = world.phase("x");
        let (crossing, house_ns) = (id("x"), world.now);
        world.apply(Event::Occupancy {
            crossing,
            level_samples,
            deviation_samples: 0.2,
            house_ns,
        });
    }
    let moved = |t: &&(i64, Transition)| matches!(t.1, Transition::Centred { .. });
    assert_eq!(world.transitions.iter().filter(moved).count(), 1);
    let status = world
        .engine
        .status(&id("x"), world.now)
        .expect("it was declared");
    assert!((status.phase_error_samples - world.phase("x")).abs() < 0.5);
    world.run_until(2 * HOUR);
    assert!(world.phase("x").abs() <= 4.0);
    let recoveries = world
        .tally("x")
        .settings
        .iter()
        .filter(|s| s.reason == Reason::Recovery);
    assert!(recoveries.count() > 0);
}

#[test]
fn small_occupancies_sharpen_the_account() {
    let mut world = facility(crystal(8e-6, 1e-10));
    world.run_until(HOUR);
    let before = world
        .engine
        .status(&id("x"), world.now)
        .expect("it was declared");
    for _ in 0..50 {
        world.run_until(world.now + SECOND);
        let level_samples = world.phase("x");
        let (crossing, house_ns) = (id("x"), world.now);
        world.apply(Event::Occupancy {
            crossing,
            level_samples,
            deviation_samples: 0.05,
            house_ns,
        });
    }
    let after = world
        .engine
        .status(&id("x"), world.now)
        .expect("it was declared");
    assert!(after.phase_deviation_samples < 0.5 * before.phase_deviation_samples);
    let off = (after.phase_error_samples - world.phase("x")).abs();
    assert!(off < 4.0 * after.phase_deviation_samples, "{off}");
}

#[test]
fn a_group_switches_together() {
    let mut world = World::new();
    world.add_exact("house", 48_000);
    let names = ["left", "right", "back"];
    for (i, name) in names.into_iter().enumerate() {
        world.add(
            clock(name, 44_100),
            crystal(5e-6 * i as f64, 1e-10),
            MICROSECOND,
            SECOND,
        );
        let group = Some(id("front"));
        let lead_ns = (1 + i as i64) * SECOND;
        let declaration = crossing(&format!("x-{name}"), name, "house");
        world.cross(CrossingDeclaration {
            group,
            lead_ns,
            ..declaration
        });
    }
    world.run_until(3 * HOUR);
    let changes = |name: &str| -> Vec<(i64, i64)> {
        let settings = world.tally(&format!("x-{name}")).settings.iter();
        let changes = settings.filter(|s| !matches!(s.reason, Reason::First | Reason::Renewal));
        changes.map(|s| (s.decided_ns, s.effect_ns)).collect()
    };
    assert!(changes("left").len() > 5);
    assert_eq!(changes("left"), changes("right"));
    assert_eq!(changes("left"), changes("back"));
    // The longest lead counts for all.
    assert!(
        changes("left")
            .iter()
            .all(|(decided, effect)| effect - decided == 3 * SECOND)
    );
    let along = |s: &&Setting| s.reason == Reason::Group;
    assert!(world.tally("x-left").settings.iter().filter(along).count() > 0);
    for name in names {
        assert!(world.phase_of(&format!("x-{name}")).abs() <= 4.0);
    }
}

#[test]
fn a_group_waits_for_what_a_member_has_under_way() {
    let mut world = World::new();
    world.add_exact("house", 48_000);
    for (name, drift) in [("a", 5e-6), ("b", -5e-6)] {
        world.add(
            clock(name, 44_100),
            crystal(drift, 1e-10),
            MICROSECOND,
            SECOND,
        );
    }
    let group = Some(id("front"));
    let alone = CrossingDeclaration {
        lead_ns: 60 * SECOND,
        ..crossing("x-a", "a", "house")
    };
    let grouped = CrossingDeclaration {
        group: group.clone(),
        ..crossing("x-b", "b", "house")
    };
    world.cross(alone.clone());
    world.cross(grouped.clone());
    world.run_until(HOUR);
    // Other bounds make A change, a minute ahead; then it joins B, which has to change at once.
    let bounds = ratewright_ratio::Bounds::new(512, 512).expect("in range");
    let alone = CrossingDeclaration { bounds, ..alone };
    world.apply(Event::DeclareCrossing(alone.clone()));
    let under_way_ns = HOUR + 60 * SECOND;
    let newest = |world: &World, name: &str| -> Setting {
        let settings = &world.tally(name).settings;
        settings.last().expect("settings were made").clone()
    };
    world.run_until(HOUR + SECOND);
    assert_eq!(newest(&world, "x-a").effect_ns, under_way_ns);
    let joining = CrossingDeclaration {
        group,
        lead_ns: SECOND,
        ..alone
    };
    world.apply(Event::DeclareCrossing(joining));
    let effects = world.apply(Event::DeclareCrossing(CrossingDeclaration {
        bounds,
        ..grouped
    }));
    let told: Vec<(&str, i64, Reason)> = effects
        .settings
        .iter()
        .map(|s| (s.crossing.as_str(), s.effect_ns, s.reason))
        .collect();
    assert_eq!(
        told,
        [
            ("x-a", under_way_ns, Reason::Group),
            ("x-b", under_way_ns, Reason::Declaration),
        ]
    );
    world.run_until(3 * HOUR);
    for name in ["x-a", "x-b"] {
        assert!(world.phase_of(name).abs() <= 4.0);
    }
}

#[test]
fn another_rate_begins_anew() {
    let mut world = facility(crystal(8e-6, 1e-10));
    world.run_until(HOUR);
    world.apply(Event::DeclareClock(clock("desk", 32_000)));
    let newest = world
        .tally("x")
        .settings
        .last()
        .expect("settings were made");
    assert_eq!(
        (newest.reason, newest.average().to_string()),
        (Reason::Declaration, "3/2".into())
    );
    let status = world
        .engine
        .status(&id("x"), world.now)
        .expect("it was declared");
    assert_eq!(
        (status.state, status.phase_error_samples),
        (CrossingState::Waiting, 0.0)
    );
    let estimate = world
        .engine
        .estimate(&id("desk"), world.now)
        .expect("it was declared");
    assert!(!estimate.measured && estimate.estimate.state == State::FreeRunning);
}

#[test]
fn other_bounds_are_decided_at_once_and_a_name_changes_nothing() {
    let mut world = facility(crystal(8e-6, 1e-10));
    world.run_until(HOUR);
    let declared = world
        .engine
        .crossing(&id("x"))
        .expect("it was declared")
        .clone();
    let bounds = ratewright_ratio::Bounds::new(512, 512).expect("in range");
    let narrower = CrossingDeclaration { bounds, ..declared };
    let effects = world.apply(Event::DeclareCrossing(narrower.clone()));
    assert_eq!(effects.settings.len(), 1);
    assert_eq!(effects.settings[0].reason, Reason::Declaration);
    effects.settings[0]
        .verify(&bounds)
        .expect("the proof is for the new bounds");
    world.run_until(world.now + 5 * SECOND);
    let renamed = CrossingDeclaration {
        display_name: "Desk to house".into(),
        ..narrower
    };
    let effects = world.apply(Event::DeclareCrossing(renamed));
    assert!(effects.settings.is_empty());
}

#[test]
fn a_setting_explains_itself_in_words_and_numbers() {
    let mut world = facility(crystal(8e-6, 1e-10));
    world.run_until(HOUR);
    let declared = world.engine.crossing(&id("x")).expect("it was declared");
    let newest = world
        .tally("x")
        .settings
        .last()
        .expect("settings were made");
    let text = explain(newest, declared).join("\n");
    for part in [
        format!("Setting 1-{} of x:", newest.number),
        "the setting before it would not have kept the phase error within the 80 % of the headroom of 4 that".into(),
        "desk was +7.99".into(),
        "of a headroom of 4".into(),
        "Certificate: with L up to 1024 and M up to 1024 nothing lies between".into(),
        "if it is left alone".into(),
    ] {
        assert!(text.contains(&part), "{part:?} is missing in\n{text}");
    }
}

#[test]
fn a_device_is_composed_with_its_host() {
    // The host runs 20 ppm fast; the device, read against it, 5 ppm fast of the host.
    let mut engine = ratewright_control::Engine::new(1);
    for declaration in [
        world::exact_clock("house", 48_000),
        clock("host", 1_000_000),
        clock("desk", 48_000),
    ] {
        engine
            .apply(&Event::DeclareClock(declaration), 0)
            .expect("good");
    }
    let read = |name: &str, reference, count, reference_ns, sequence| {
        Event::Reading(ratewright_control::Reading {
            clock: id(name),
            reference,
            probe: "rack".into(),
            sequence,
            measurement: Measurement::Counter {
                count,
                bits: 64,
                reference_ns,
            },
        })
    };
    use ratewright_control::Reference::{Clock, House};
    for i in 1..=600_u64 {
        let now = i as i64 * SECOND;
        let host_ns = now + i as i64 * 20_000;
        engine
            .apply(&read("host", House, i * 1_000_020, now, i), now)
            .expect("good");
        let count = (48_000.0 * host_ns as f64 * 1e-9 * (1.0 + 5e-6)).round() as u64;
        engine
            .apply(&read("desk", Clock(id("host")), count, host_ns, i), now)
            .expect("good");
    }
    let estimate = engine
        .estimate(&id("desk"), 600 * SECOND)
        .expect("declared")
        .estimate;
    let truth = (1.0 + 20e-6) * (1.0 + 5e-6) - 1.0;
    assert!((estimate.drift - truth).abs() < 2e-7, "{}", estimate.drift);
    assert!(estimate.low < truth && truth < estimate.high);
    let refused = engine
        .apply(&read("host", Clock(id("desk")), 1, 1, 1), 601 * SECOND)
        .expect_err("a cycle");
    assert_eq!(
        (refused.field.as_str(), refused.value.as_str()),
        ("reference", "desk")
    );
    let refused = engine
        .apply(&Event::DeleteClock(id("host")), 601 * SECOND)
        .expect_err("it is used");
    assert!(
        refused
            .accepted
            .contains("clock desk is measured against it"),
        "{refused}"
    );
}
