//! Whole runs against closed forms: what must come out follows from the plan, not from the engine.

use ratewright_control::CrossingState;
use ratewright_rehearsal::file::{Script, parse};
use ratewright_rehearsal::{Report, Run};
use ratewright_timing::State;

const EXAMPLE: &str = include_str!("../../../deploy/rehearsal.example.toml");

/// A quiet clock of 48 kHz that is read by a quiet host, into an exact one.
fn quiet(source_ppm: f64, more: &str) -> Script {
    let quiet = "white_ppb = 0.01, walk_ppb = 0.0001";
    let file = format!(
        r#"
        [[host]]
        id = "host"
        truth = {{ {quiet} }}
        link = {{ jitter_us = 2 }}
        [[clock]]
        id = "desk"
        rate = 48000
        host = "host"
        truth = {{ {quiet}, drift_ppm = {source_ppm} }}
        [[clock]]
        id = "house"
        rate = 48000
        exact = true
        [[crossing]]
        id = "line"
        source = "desk"
        sink = "house"
        headroom_samples = 48
        {more}
        "#
    );
    parse(&file).unwrap_or_else(|faults| panic!("{faults:?}"))
}

fn played(script: &Script, length_s: f64) -> Report {
    let mut run = Run::traced(script.plan.clone(), script.seed).unwrap();
    run.until(length_s);
    run.report()
}

/// A crossing that switches lazily spends a share of its headroom on the swing. It is begun with the
/// ratio of the nominal rates, 12 ppm off, so the phase error runs outward while the clock is learned.
#[test]
fn lazy_switching_has_room_for_its_swing_from_the_beginning() {
    for (bounds, seed) in [("512", 1), ("512", 2), ("1024", 3)] {
        let more = format!(
            r#"max_l = {bounds}
            max_m = {bounds}
            realisation = "lazy""#
        );
        let mut script = quiet(12.0, &more);
        script.seed = seed;
        let report = played(&script, 7_200.0);
        let line = &report.crossings[0];
        assert_eq!(line.slips, 0, "{line:?}");
        assert!(line.worst_samples <= 48.0, "{line:?}");
        assert!(line.settings < 30, "{line:?}");
    }
}

#[test]
fn the_same_seed_gives_the_same_report_however_it_is_stepped() {
    let Script { plan, seed, .. } = parse(EXAMPLE).unwrap();
    let mut whole = Run::traced(plan.clone(), seed).unwrap();
    whole.until(900.0);
    let mut stepped = Run::traced(plan.clone(), seed).unwrap();
    for step in 1..=400 {
        stepped.until(f64::from(step) * 2.25);
    }
    let (whole, stepped) = (whole.report(), stepped.report());
    assert_eq!(whole, stepped);
    assert!(whole.readings > 3_000, "{} readings", whole.readings);
    assert_eq!((whole.refused, &whole.first_refusal), (0, &None));
    let mut other = Run::traced(plan, seed + 1).unwrap();
    other.until(900.0);
    assert_ne!(other.report().crossings, whole.crossings);
}

/// The setting that a follower keeps is 1/1, the first one. The source is 10 ppm fast, so that 0.48 samples
/// a second are too many, and a headroom of 48 lasts 100 s from the first block end after the lead of 1 s.
#[test]
fn a_follower_that_stops_slips_when_the_closed_form_says() {
    let script = quiet(
        10.0,
        "[[event]]\nwhat = \"follower-stuck\"\ncrossing = \"line\"\nat_s = 1.005",
    );
    let report = played(&script, 301.0);
    let line = &report.crossings[0];
    assert_eq!(line.slips, 1);
    let slip_s = line.first_slip_s.unwrap();
    // It is looked at every ten seconds.
    assert!(
        (101.0..=111.1).contains(&slip_s),
        "slipped after {slip_s} s"
    );
    // Looked at last at 300 s: 299 s of 0.48 samples.
    let expected = 0.48 * 299.0;
    assert!(
        (line.worst_samples - expected).abs() < 0.02,
        "{} for {expected}",
        line.worst_samples
    );
}

/// The counterpart: the same facility with a follower that works.
#[test]
fn a_facility_that_can_be_held_is_held() {
    let report = played(&quiet(10.0, ""), 7_200.0);
    let line = &report.crossings[0];
    assert_eq!((line.slips, line.first_slip_s), (0, None));
    assert!(line.worst_samples < 48.0, "{}", line.worst_samples);
    assert!(
        line.states.seconds_in(CrossingState::Holding) > 6_000.0,
        "{:?}",
        line.states
    );
    let whole_s: f64 = line.states.seconds().map(|(_, s)| s).sum();
    assert!((whole_s - 7_200.0).abs() < 1e-6);
    let desk = report
        .clocks
        .iter()
        .find(|clock| clock.clock.as_str() == "desk")
        .unwrap();
    assert!(desk.locked_after_s.unwrap() < 900.0, "{desk:?}");
}

/// An hour without readings: both clocks are in holdover for it, less what it takes to notice, and the
/// quiet source stays where it was, so that nothing slips.
#[test]
fn an_hours_outage_is_held_over() {
    let outage = "[[event]]\nwhat = \"reference-outage\"\nat_s = 3600\nfor_s = 3600";
    let report = played(&quiet(10.0, outage), 9_000.0);
    for clock in &report.clocks {
        let held_s = clock.states.seconds_in(State::Holdover);
        assert!(
            (3_480.0..3_700.0).contains(&held_s),
            "{}: {held_s} s",
            clock.clock
        );
    }
    assert_eq!(report.slips(), 0);
    let gap = report.crossings[0]
        .trace
        .phase
        .iter()
        .filter(|p| (3_600.0..7_200.0).contains(&p.at_s));
    assert!(gap.count() >= 360);
}

/// What a clock shows may jump; no sample is made or lost by it. At 0 ppm under 1/1 φ stays 0.
#[test]
fn a_step_moves_no_sample() {
    let events = "[[event]]\nwhat = \"follower-stuck\"\ncrossing = \"line\"\nat_s = 1.005\n\
                  [[event]]\nwhat = \"step\"\nclock = \"desk\"\nat_s = 100\nby_ms = -40";
    let report = played(&quiet(0.0, events), 300.0);
    assert!(
        report.crossings[0].worst_samples < 0.01,
        "{}",
        report.crossings[0].worst_samples
    );
}

/// A jump of 2 ppm under a ratio that is not changed any more: 0.096 samples a second from then on.
#[test]
fn a_frequency_jump_bends_the_phase_error() {
    let events = "[[event]]\nwhat = \"follower-stuck\"\ncrossing = \"line\"\nat_s = 1.005\n\
                  [[event]]\nwhat = \"frequency-jump\"\nclock = \"desk\"\nat_s = 100\nby_ppm = 2";
    let report = played(&quiet(0.0, events), 300.0);
    let last = report.crossings[0].trace.phase.last().unwrap();
    let expected = 48_000.0 * 2e-6 * (last.at_s - 100.0);
    assert!(
        (last.truth - expected).abs() < 0.02,
        "{} for {expected}",
        last.truth
    );
}

/// Readings of a counter that began at 0 again after 60 s are ⌊f·(t − 60)⌋, less what a latch takes.
#[test]
fn a_reset_counter_begins_at_nothing() {
    let script = quiet(
        0.0,
        "[[event]]\nwhat = \"counter-reset\"\nclock = \"desk\"\nat_s = 60",
    );
    let mut facility = ratewright_rehearsal::Facility::new(script.plan, script.seed, 0).unwrap();
    let mut seen = 0;
    for delivered in facility.until(120_000_000_000) {
        let ratewright_timing::Measurement::Counter {
            count,
            reference_ns,
            ..
        } = delivered.reading.measurement
        else {
            continue;
        };
        if reference_ns > 60_001_000_000 {
            let expected = (reference_ns - 60_000_000_000) as f64 * 48e-6;
            let off = expected - count as f64;
            // A latch takes some microseconds: 48 samples are a millisecond.
            assert!((-0.5..48.0).contains(&off), "{count} for {expected}");
            seen += 1;
        }
    }
    assert!(seen > 50);
}

#[test]
fn followers_apply_at_block_ends_only() {
    let script = quiet(10.0, "follower = { block_samples = 4800, delivery_ms = 0 }");
    let report = played(&script, 600.0);
    // The exact sink ends a block every 0.1 s: what happened beside the looks at 10 s is on that grid.
    let changes: Vec<_> = report.crossings[0]
        .trace
        .phase
        .iter()
        .filter(|p| p.at_s % 10.0 > 1e-6)
        .collect();
    assert!(!changes.is_empty());
    for point in changes {
        let blocks = point.at_s * 10.0;
        assert!(
            (blocks - blocks.round()).abs() < 1e-6,
            "applied after {} s",
            point.at_s
        );
    }
}

#[test]
fn every_fault_has_its_line() {
    let faults = parse(
        r#"days = 400
sed = 3
[[host]]
id = "host"
link = { loss_percent = 100, speed = 3 }
[[clock]]
id = "desk"
rate = 48000
host = "hosts"
read = "ear"
truth = { drift_ppm = "fast" }
[[clock]]
id = "house"
rate = 48000
exact = true
[[crossing]]
id = "line"
source = "house"
sink = "nowhere"
follower = { block_samples = 0 }
[[event]]
what = "earthquake"
at_s = 5
[[event]]
what = "step"
clock = "house"
at_s = -1
[[event]]
what = "link-outage"
host = "host"
at_s = 5
"#,
    )
    .unwrap_err();
    let found: Vec<_> = faults
        .iter()
        .map(|fault| format!("{}: {fault}", fault.line))
        .collect();
    let expected = [
        "1: days is 400; accepted: 0.001 to 366 days",
        "2: sed is no key here; accepted: days, seed, host, clock, crossing, event",
        "5: host[0].link.loss_percent is 100; accepted: 0 to 99 %",
        "5: host[0].link.speed is no key here",
        "9: clock[0].host is \"hosts\"; accepted: the id of a [[host]]",
        "10: clock[0].read is \"ear\"; accepted: \"counter\"",
        "11: clock[0].truth.drift_ppm is \"fast\"; accepted: -10000 to 10000 ppm",
        "19: crossing[0].sink is \"nowhere\"; accepted: the id of a [[clock]]",
        "20: crossing[0].follower.block_samples is 0; accepted: 1 to 1000000",
        "22: event[0].what is \"earthquake\"; accepted: \"link-outage\"",
        "24: event[1].by_ms is missing; accepted: -1000000 to 1000000 ms",
        "26: event[1].clock is \"house\"; accepted: the id of a [[host]] or of a measured",
        "27: event[1].at_s is -1; accepted: 0 to 31622400 seconds",
        "28: event[2].for_s is missing; accepted: 0 to 31622400 seconds",
    ];
    assert_eq!(found.len(), expected.len(), "{found:#?}");
    for (found, expected) in found.iter().zip(expected) {
        assert!(
            found.starts_with(expected),
            "{found:?} should begin {expected:?}"
        );
    }
}
