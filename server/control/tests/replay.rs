//! Same events, same bytes: replayed, and saved and restored on the way.

mod world;

use ratewright_control::{CrossingDeclaration, Engine, Event, Realisation};
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

fn bytes<T: serde::Serialize>(value: &T) -> Vec<u8> {
    postcard::to_stdvec(value).expect("the state can be saved")
}

#[test]
fn a_replayed_journal_gives_the_same_bytes() {
    let journal = journal();
    assert!(journal.len() > 6_000, "{} events", journal.len());
    let (mut one, mut other) = (Engine::new(1), Engine::new(1));
    for (event, now) in &journal {
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
    let journal = journal();
    let mut engine = Engine::new(1);
    for (event, now) in &journal {
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
