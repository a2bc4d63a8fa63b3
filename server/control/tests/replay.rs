//! Same events, same bytes: replayed, and saved and restored on the way.

mod world;

use ratewright_control::{
    ClockDeclaration, CrossingDeclaration, Engine, Event, Realisation, Transition,
};
use ratewright_timing::Oscillator;
use ratewright_timing::sim::{ClockModel, Delay, Disturbance, Upset};
use world::{HOUR, SECOND, World, clock, crossing, crystal, id};

/// The journal of an eventful hour.
fn journal() -> Vec<(Event, i64)> {
    let mut world = World::new();
    world.journal = Some(Vec::new());
    world.add_exact("house", 48_000);
    let upsets = vec![Upset {
        at_ns: HOUR / 2,
        what: Disturbance::DriftJump(2e-6),
    }];
    let delay = Delay::Normal { deviation_s: 5e-6 };
    world.add(
        clock("desk", 44_100),
        ClockModel {
            upsets,
            ..crystal(9e-6, 1e-9)
        },
        delay,
        SECOND,
    );
    world.add(clock("wall", 48_000), crystal(-7e-6, 1e-9), delay, SECOND);
    let group = Some(id("all"));
    world.cross(CrossingDeclaration {
        group: group.clone(),
        ..crossing("x", "desk", "house")
    });
    world.cross(CrossingDeclaration {
        group,
        headroom_samples: 1.0,
        ..crossing("y", "desk", "wall")
    });
    let realisation = Realisation::Single;
    world.cross(CrossingDeclaration {
        realisation,
        ..crossing("z", "wall", "house")
    });
    world.follow_late("x", SECOND, true);
    world.silence("wall", HOUR / 4, HOUR / 3);
    world.run_until(HOUR - 60 * SECOND);
    let (house_ns, level_samples) = (world.now, world.phase("y"));
    let crossing = id("y");
    world.apply(Event::Occupancy {
        crossing,
        level_samples,
        deviation_samples: 0.1,
        house_ns,
    });
    world.run_until(HOUR);
    world.journal.expect("it was set above")
}

/// The journal of an hour under an operator's hand: every way of realising, a floor, a trial, a
/// pin, a changeover, statistics, and a sink that begins anew.
fn handled() -> Vec<(Event, i64)> {
    let mut world = World::new();
    world.journal = Some(Vec::new());
    world.add_exact("house", 48_000);
    let delay = Delay::Normal { deviation_s: 5e-6 };
    for (name, drift) in [("desk", 9e-6), ("spare", -5e-6)] {
        let declaration = ClockDeclaration {
            statistics: true,
            oscillator: Some(Oscillator::Compensated),
            ..clock(name, 48_000)
        };
        world.add(declaration, crystal(drift, 1e-9), delay, SECOND);
    }
    let backup = Some(id("spare"));
    for (name, realisation, silent) in [
        ("steps", Realisation::Stepping, false),
        ("lazy", Realisation::Lazy, false),
        ("trial", Realisation::Cadence, true),
    ] {
        world.cross(CrossingDeclaration {
            realisation,
            silent,
            backup: backup.clone(),
            least_hold_ns: 60 * SECOND,
            pitch_limit_ppm: 50.0,
            review_horizon_ns: 300 * SECOND,
            ..crossing(name, "desk", "house")
        });
    }
    let (by, note) = ("an operator".to_owned(), "a trial of hands".to_owned());
    let crossing = id("lazy");
    world.run_until(HOUR / 4);
    world.apply(Event::Pin {
        crossing: crossing.clone(),
        by: by.clone(),
        note: note.clone(),
    });
    world.run_until(HOUR / 2);
    world.apply(Event::Release { crossing, by, note });
    world.comes_from("steps", "spare");
    world.apply(Event::ChangeOver {
        crossing: id("steps"),
        source: id("spare"),
        by: "an operator".into(),
        note: String::new(),
    });
    for sink_sample in [48_000_000, 1] {
        world.run_until(world.now + HOUR / 5);
        let status = world.engine.status(&id("steps"), world.now);
        let newest = status.and_then(|s| s.setting).expect("there is always one");
        world.apply(Event::Applied {
            crossing: id("steps"),
            epoch: newest.epoch,
            number: newest.number,
            house_ns: world.now,
            sink_sample,
        });
    }
    world.run_until(HOUR);
    assert_eq!(
        world
            .transitions
            .iter()
            .filter(
                |(_, t)| matches!(t, Transition::Centred { reason, .. } if reason.contains("fell"))
            )
            .count(),
        1
    );
    world.journal.expect("it was set above")
}

fn bytes<T: serde::Serialize>(value: &T) -> Vec<u8> {
    postcard::to_stdvec(value).expect("the state can be saved")
}

#[test]
fn a_replayed_journal_gives_the_same_bytes() {
    for journal in [journal(), handled()] {
        assert!(journal.len() > 6_000, "{} events", journal.len());
        replay_is_identical(&journal);
    }
}

fn replay_is_identical(journal: &[(Event, i64)]) {
    let (mut one, mut other) = (Engine::new(1), Engine::new(1));
    for (event, now) in journal {
        let effects = one.apply(event, *now).expect("good events");
        // The journal itself goes through bytes, too.
        let stored: Event = postcard::from_bytes(&bytes(event)).expect("an event can be restored");
        assert_eq!(
            bytes(&effects),
            bytes(&other.apply(&stored, *now).expect("good events"))
        );
    }
    assert_eq!(bytes(&one), bytes(&other));
}

#[test]
fn a_restored_engine_goes_on_identically() {
    for journal in [journal(), handled()] {
        restored_is_identical(&journal);
    }
}

fn restored_is_identical(journal: &[(Event, i64)]) {
    let mut engine = Engine::new(1);
    for (event, now) in journal {
        engine.apply(event, *now).expect("good events");
    }
    for part in [3, 500, 2_000, 6_000] {
        let mut restored = Engine::new(1);
        for (i, (event, now)) in journal.iter().enumerate() {
            if i == part {
                restored =
                    postcard::from_bytes(&bytes(&restored)).expect("the state can be restored");
            }
            restored.apply(event, *now).expect("good events");
        }
        assert_eq!(
            bytes(&restored),
            bytes(&engine),
            "restored before event {part}"
        );
    }
}
