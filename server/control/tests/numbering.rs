//! Setting numbers are never used twice.

mod world;

use ratewright_control::{Engine, Event, Setting};
use world::{SECOND, crossing, exact_clock, id};

fn engine() -> Engine {
    let mut engine = Engine::new(1);
    for (name, hz) in [("disc", 44_100), ("house", 48_000)] {
        engine
            .apply(&Event::DeclareClock(exact_clock(name, hz)), 0)
            .expect("good");
    }
    engine
}

fn made(engine: &mut Engine, event: Event, now: i64) -> Vec<(u64, u64)> {
    let effects = engine.apply(&event, now).expect("good");
    effects
        .settings
        .iter()
        .map(|Setting { epoch, number, .. }| (*epoch, *number))
        .collect()
}

#[test]
fn a_crossing_that_is_deleted_and_declared_again_goes_on_counting() {
    let mut engine = engine();
    let declare = || Event::DeclareCrossing(crossing("x", "disc", "house"));
    assert_eq!(made(&mut engine, declare(), 0), [(1, 1)]);
    // Reviewed after an hour.
    assert_eq!(made(&mut engine, Event::Tick, 3700 * SECOND), [(1, 2)]);
    assert_eq!(
        made(&mut engine, Event::DeleteCrossing(id("x")), 3701 * SECOND),
        []
    );
    assert_eq!(made(&mut engine, declare(), 3702 * SECOND), [(1, 3)]);
    engine
        .apply(&Event::DeleteCrossing(id("x")), 3703 * SECOND)
        .expect("good");
    let clock = Event::DeleteClock(id("disc"));
    engine
        .apply(&clock, 3703 * SECOND)
        .expect("nothing uses it any more");
}

#[test]
fn a_new_epoch_goes_on_counting_too() {
    let mut engine = engine();
    let declare = |name: &str| Event::DeclareCrossing(crossing(name, "disc", "house"));
    assert_eq!(made(&mut engine, declare("x"), 0), [(1, 1)]);
    assert_eq!(made(&mut engine, Event::OpenEpoch { epoch: 5 }, SECOND), []);
    assert_eq!(engine.epoch(), 5);
    assert_eq!(made(&mut engine, Event::Tick, 3700 * SECOND), [(5, 2)]);
    assert_eq!(made(&mut engine, declare("y"), 3701 * SECOND), [(5, 1)]);
}

#[test]
fn an_earlier_now_counts_as_the_latest_seen() {
    let mut engine = engine();
    engine.apply(&Event::Tick, 100 * SECOND).expect("good");
    let declare = Event::DeclareCrossing(crossing("x", "disc", "house"));
    let effects = engine.apply(&declare, 50 * SECOND).expect("good");
    assert_eq!(effects.settings[0].decided_ns, 100 * SECOND);
}

#[test]
fn one_event_does_a_bounded_amount_of_work() {
    let mut engine = engine();
    for i in 0..200 {
        let declare = Event::DeclareCrossing(crossing(&format!("x{i}"), "disc", "house"));
        engine.apply(&declare, 0).expect("good");
    }
    // All two hundred are due for review at once; the rest stays due.
    let mut renewed = Vec::new();
    while engine
        .next_due()
        .is_some_and(|due_ns| due_ns <= 3700 * SECOND)
    {
        renewed.push(made(&mut engine, Event::Tick, 3700 * SECOND).len());
    }
    assert_eq!(renewed, [64, 64, 64, 8]);
}
