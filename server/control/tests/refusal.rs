//! What is refused, how it is told, and that nothing changes by it.

mod world;

use num_rational::Ratio;
use ratewright_control::{
    ClockDeclaration, CrossingDeclaration, Engine, Event, Reading, Reference, RefusalKind,
};
use ratewright_timing::Measurement;
use world::{SECOND, clock, crossing, exact_clock, id};

/// A facility with a clock that was read up to second 100 by all the probes it may have, and
/// with a crossing at its first setting.
fn engine() -> Engine {
    let mut engine = Engine::new(2);
    let mut apply = |event: Event, now: i64| engine.apply(&event, now).expect("a good event");
    apply(Event::DeclareClock(exact_clock("house", 48_000)), 0);
    apply(Event::DeclareClock(clock("desk", 44_100)), 0);
    apply(Event::DeclareClock(clock("spare", 44_100)), 0);
    for probe in 1..=8 {
        for i in 1..=20 {
            apply(
                Event::Reading(reading(&format!("p{probe}"), i * 44_100, i as i64 * SECOND)),
                100 * SECOND,
            );
        }
    }
    apply(
        Event::DeclareCrossing(crossing("x", "desk", "house")),
        100 * SECOND,
    );
    engine
}

fn reading(probe: &str, count: u64, reference_ns: i64) -> Reading {
    Reading {
        clock: id("desk"),
        reference: Reference::House,
        probe: probe.to_owned(),
        sequence: 0,
        measurement: Measurement::Counter {
            count,
            bits: 32,
            reference_ns,
        },
    }
}

fn bytes(engine: &Engine) -> Vec<u8> {
    postcard::to_stdvec(engine).expect("the state can be saved")
}

/// Applies a bad event: the kind, the field and the value must be told, and nothing may change.
#[track_caller]
fn refused(event: Event, kind: RefusalKind, field: &str, value: &str) {
    let mut engine = engine();
    let before = bytes(&engine);
    let refusal = engine
        .apply(&event, 101 * SECOND)
        .expect_err("it should be refused");
    assert_eq!(
        (refusal.kind, refusal.field.as_str()),
        (kind, field),
        "{refusal}"
    );
    assert!(refusal.value.contains(value), "{refusal}");
    assert!(!refusal.accepted.is_empty());
    assert_eq!(bytes(&engine), before, "{refusal}");
    engine
        .apply(
            &Event::Reading(reading("p1", 101 * 44_100, 101 * SECOND)),
            101 * SECOND,
        )
        .expect("the next is good");
}

use RefusalKind::{Invalid, NotFound, Precondition};

#[test]
fn readings() {
    let good = reading("p1", 101 * 44_100, 101 * SECOND);
    let read = |change: &dyn Fn(&mut Reading)| {
        let mut reading = good.clone();
        change(&mut reading);
        Event::Reading(reading)
    };
    refused(
        read(&|r| r.clock = id("nobody")),
        NotFound,
        "clock",
        "nobody",
    );
    refused(
        read(&|r| r.reference = Reference::Clock(id("ghost"))),
        NotFound,
        "reference",
        "ghost",
    );
    refused(
        read(&|r| r.clock = id("house")),
        Precondition,
        "clock",
        "house",
    );
    refused(
        read(&|r| r.reference = Reference::Clock(id("desk"))),
        Invalid,
        "reference",
        "desk",
    );
    refused(
        read(&|r| r.probe = "p9".into()),
        Precondition,
        "probe",
        "p9",
    );
    refused(
        read(&|r| (r.clock, r.probe) = (id("spare"), String::new())),
        Invalid,
        "probe",
        "0 bytes",
    );
    let back = Measurement::Counter {
        count: 1,
        bits: 32,
        reference_ns: 5,
    };
    refused(
        read(&|r| r.measurement = back),
        Invalid,
        "measurement.reference_ns",
        "5",
    );
    let nan = Measurement::Frequency {
        drift: f64::NAN,
        deviation: 1e-9,
        reference_ns: 5,
    };
    let (new, other) = (id("spare"), nan);
    refused(
        read(&|r| (r.clock, r.measurement) = (new.clone(), other)),
        Invalid,
        "measurement.drift",
        "NaN",
    );
    let kind = Measurement::Frequency {
        drift: 0.0,
        deviation: 1e-9,
        reference_ns: 101 * SECOND,
    };
    refused(
        read(&|r| r.measurement = kind),
        Precondition,
        "measurement.kind",
        "frequency",
    );
}

#[test]
fn clocks() {
    let declare = |change: &dyn Fn(&mut ClockDeclaration)| {
        let mut declaration = clock("desk", 44_100);
        change(&mut declaration);
        Event::DeclareClock(declaration)
    };
    refused(
        declare(&|c| c.nominal_hz = Ratio::from_integer(0)),
        Invalid,
        "nominal_hz",
        "0/1",
    );
    refused(
        declare(&|c| c.nominal_hz = Ratio::new_raw(1, 0)),
        Invalid,
        "nominal_hz",
        "1/0",
    );
    refused(
        declare(&|c| c.nominal_hz = Ratio::new(1, 1000)),
        Invalid,
        "nominal_hz",
        "48000 Hz for 1/1000 Hz",
    );
    refused(
        declare(&|c| c.tolerance_ppm = f64::NAN),
        Invalid,
        "tolerance_ppm",
        "NaN",
    );
    refused(
        declare(&|c| c.tolerance_ppm = -1.0),
        Invalid,
        "tolerance_ppm",
        "-1",
    );
    refused(
        declare(&|c| c.display_name = "x".repeat(129)),
        Invalid,
        "display_name",
        "129 bytes",
    );
    refused(
        declare(&|c| c.quantum_ns = SECOND + 1),
        Invalid,
        "quantum_ns",
        "1000000001",
    );
    refused(
        Event::DeleteClock(id("nobody")),
        NotFound,
        "clock",
        "nobody",
    );
    refused(
        Event::DeleteClock(id("desk")),
        Precondition,
        "clock",
        "desk",
    );
}

#[test]
fn crossings() {
    let declare = |change: &dyn Fn(&mut CrossingDeclaration)| {
        let mut declaration = crossing("x", "desk", "house");
        change(&mut declaration);
        Event::DeclareCrossing(declaration)
    };
    refused(
        declare(&|c| c.source = id("nobody")),
        NotFound,
        "source",
        "nobody",
    );
    refused(
        declare(&|c| c.sink = id("nobody")),
        NotFound,
        "sink",
        "nobody",
    );
    refused(declare(&|c| c.sink = id("desk")), Invalid, "sink", "desk");
    refused(
        declare(&|c| c.headroom_samples = 0.0),
        Invalid,
        "headroom_samples",
        "0",
    );
    refused(
        declare(&|c| c.headroom_samples = f64::INFINITY),
        Invalid,
        "headroom_samples",
        "inf",
    );
    refused(declare(&|c| c.lead_ns = -1), Invalid, "lead_ns", "-1");
    refused(
        declare(&|c| c.review_horizon_ns = 1),
        Invalid,
        "review_horizon_ns",
        "1",
    );
    refused(
        declare(&|c| c.least_hold_ns = 3_600 * SECOND + 1),
        Invalid,
        "least_hold_ns",
        "3600000000001",
    );
    for limit in [0.0, 0.09, 1000.1, f64::NAN] {
        let text = limit.to_string();
        refused(
            declare(&|c| c.pitch_limit_ppm = limit),
            Invalid,
            "pitch_limit_ppm",
            &text,
        );
    }
    for (backup, kind) in [("desk", Invalid), ("house", Invalid), ("nobody", NotFound)] {
        refused(
            declare(&|c| c.backup = Some(id(backup))),
            kind,
            "backup",
            backup,
        );
    }
    refused(Event::DeleteCrossing(id("y")), NotFound, "crossing", "y");
}

#[test]
fn reports() {
    let applied = |name: &str, epoch, number, house_ns| Event::Applied {
        crossing: id(name),
        epoch,
        number,
        house_ns,
        sink_sample: 0,
    };
    refused(applied("y", 2, 1, 101 * SECOND), NotFound, "crossing", "y");
    refused(applied("x", 2, 7, 101 * SECOND), NotFound, "number", "2/7");
    refused(applied("x", 1, 1, 101 * SECOND), NotFound, "number", "1/1");
    refused(
        applied("x", 2, 1, 99 * SECOND),
        Invalid,
        "house_ns",
        "99000000000",
    );
    refused(
        applied("x", 2, 1, 103 * SECOND),
        Invalid,
        "house_ns",
        "103000000000",
    );
    let level = |name: &str, level_samples, deviation_samples, house_ns| Event::Occupancy {
        crossing: id(name),
        level_samples,
        deviation_samples,
        house_ns,
    };
    refused(
        level("y", 0.0, 1.0, 101 * SECOND),
        NotFound,
        "crossing",
        "y",
    );
    refused(
        level("x", f64::NAN, 1.0, 101 * SECOND),
        Invalid,
        "level_samples",
        "NaN",
    );
    refused(
        level("x", 0.0, 0.0, 101 * SECOND),
        Invalid,
        "deviation_samples",
        "0",
    );
    refused(level("x", 0.0, 1.0, 0), Invalid, "house_ns", "0");
    refused(Event::OpenEpoch { epoch: 2 }, Precondition, "epoch", "2");
}

#[test]
fn chains_to_house_time_are_bounded() {
    let mut engine = Engine::new(1);
    let names = ["a", "b", "c", "d", "e"];
    for name in names {
        engine
            .apply(&Event::DeclareClock(clock(name, 48_000)), 0)
            .expect("good");
    }
    let mut read = |name: &str, reference: Reference| {
        let clock = id(name);
        engine.apply(
            &Event::Reading(Reading {
                clock,
                reference,
                ..reading("p", 1, 1)
            }),
            SECOND,
        )
    };
    read("a", Reference::House).expect("good");
    for pair in names.windows(2).take(3) {
        read(pair[1], Reference::Clock(id(pair[0]))).expect("up to four links");
    }
    let refusal = read("e", Reference::Clock(id("d"))).expect_err("a fifth link");
    assert_eq!(
        (refusal.kind, refusal.field.as_str()),
        (Precondition, "reference")
    );
}
