//! Plays a facility to the engine.

use ratewright_control::{Effects, Engine, Event, HouseNs, Refusal};

use crate::facility::Facility;

/// The readings of this much house time are made at once, ns.
const STRIDE_NS: i64 = 10_000_000_000;

/// One event of a rehearsal and what the engine said to it.
#[derive(Debug)]
pub struct Occasion<'a> {
    /// House time at which the event was applied, ns.
    pub now_ns: HouseNs,
    /// The event.
    pub event: &'a Event,
    /// What came of it.
    pub result: &'a Result<Effects, Refusal>,
}

/// Plays `facility` to `engine` up to `until_ns`: its readings as they arrive, and a tick whenever the
/// engine is due for one. `witness` sees everything, in order.
///
/// Call order: apply [`Facility::declarations`] at the origin (see [`declare`]), then rehearse in as many
/// steps as you like; the steps do not change what happens.
pub fn rehearse(
    engine: &mut Engine,
    facility: &mut Facility,
    until_ns: HouseNs,
    mut witness: impl FnMut(&Engine, Occasion<'_>),
) {
    let mut done_ns = facility.origin_ns();
    while done_ns < until_ns {
        done_ns = until_ns.min(done_ns + STRIDE_NS);
        for delivered in facility.until(done_ns) {
            tick_until(engine, delivered.at_ns, &mut witness);
            apply(
                engine,
                &Event::Reading(delivered.reading),
                delivered.at_ns,
                &mut witness,
            );
        }
    }
    tick_until(engine, until_ns, &mut witness);
}

/// Declares what the facility's plan declares, at its origin.
pub fn declare(
    engine: &mut Engine,
    facility: &Facility,
    mut witness: impl FnMut(&Engine, Occasion<'_>),
) {
    for event in facility.declarations() {
        apply(engine, &event, facility.origin_ns(), &mut witness);
    }
}

fn tick_until(
    engine: &mut Engine,
    until_ns: HouseNs,
    witness: &mut impl FnMut(&Engine, Occasion<'_>),
) {
    while let Some(due_ns) = engine.next_due().filter(|&due_ns| due_ns <= until_ns) {
        apply(engine, &Event::Tick, due_ns, witness);
    }
}

fn apply(
    engine: &mut Engine,
    event: &Event,
    now_ns: HouseNs,
    witness: &mut impl FnMut(&Engine, Occasion<'_>),
) {
    let result = engine.apply(event, now_ns);
    witness(
        engine,
        Occasion {
            now_ns,
            event,
            result: &result,
        },
    );
}
