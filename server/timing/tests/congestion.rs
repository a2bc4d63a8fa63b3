//! Two-way paths under congestion: queues make rows late, and nothing else of them.

use num_rational::Ratio;
use ratewright_timing::sim::{
    Clock, ClockModel, Delay, Disturbance, Path, PathModel, Period, Upset, probe,
};
use ratewright_timing::{Event, Link, LinkConfig, Outcome};

const NS: i64 = 1_000_000_000;
const HOUR_S: i64 = 3600;

/// Heavy-tailed queues that resemble the ones before.
fn queued() -> PathModel {
    PathModel {
        least_s: 1e-3,
        ..PathModel::new(Delay::Lomax {
            scale_s: 90e-6,
            exponent: 2.2,
            correlation: 0.3,
            deviation_s: 2e-6,
        })
    }
}

fn congested(from_s: i64, to_s: i64, factor: f64) -> PathModel {
    let period = Period {
        from_ns: from_s * NS,
        to_ns: to_s * NS,
    };
    PathModel {
        congestions: vec![(period, factor)],
        ..queued()
    }
}

/// What two hours of exchanges, one a second, came to.
struct Played {
    calls: Vec<(i64, Event)>,
    /// Largest error of the drift in the second hour, ppm.
    worst_ppm: f64,
}

impl Played {
    fn calls(&self, event: Event) -> Vec<i64> {
        let of = self.calls.iter().filter(|call| call.1 == event);
        of.map(|call| call.0).collect()
    }
}

fn play(paths: [PathModel; 2], upsets: Vec<Upset>, seed: u64) -> Played {
    let model = ClockModel {
        drift: 30e-6,
        upsets,
        ..ClockModel::crystal()
    };
    let mut clock = Clock::new(model, seed);
    let [out, back] = paths;
    let mut out = Path::new(out, seed + 1000);
    let mut back = Path::new(back, seed + 2000);
    let mut link = Link::new(LinkConfig::new(Ratio::from_integer(48_000))).unwrap();
    let mut played = Played {
        calls: Vec::new(),
        worst_ppm: 0.0,
    };
    for at_s in 1..2 * HOUR_S {
        let at_ns = at_s * NS;
        let reading = probe::exchange(&mut clock, &mut out, &mut back, at_ns).unwrap();
        if let Outcome::Event(event) = link.observe(at_s as u64, &reading).unwrap() {
            played.calls.push((at_s, event));
        }
        if at_s > HOUR_S {
            let off_ppm = 1e6 * (link.estimate(at_ns).drift - clock.drift(at_ns)).abs();
            played.worst_ppm = played.worst_ppm.max(off_ppm);
        }
    }
    played
}

#[test]
fn queues_ten_times_as_long_both_ways_are_no_event_and_move_no_clock() {
    for seed in 0..24 {
        let path = || congested(HOUR_S, HOUR_S + 900, 10.0);
        let played = play([path(), path()], Vec::new(), seed);
        assert_eq!(played.calls, [], "seed {seed}");
        assert!(played.worst_ppm < 0.02, "seed {seed}: {}", played.worst_ppm);
    }
}

#[test]
fn a_longer_route_is_found_within_a_congestion() {
    for seed in 0..8 {
        let out = PathModel {
            route_changes: vec![((HOUR_S + 120) * NS, 600e-6)],
            ..congested(HOUR_S, HOUR_S + 600, 5.0)
        };
        let played = play([out, queued()], Vec::new(), seed);
        let found = played.calls(Event::RouteChange);
        let after_s = found.first().map(|at_s| at_s - HOUR_S - 120);
        assert!(
            after_s.is_some_and(|s| (0..140).contains(&s)),
            "seed {seed}: {:?}",
            played.calls
        );
        assert!(played.worst_ppm < 0.02, "seed {seed}: {}", played.worst_ppm);
    }
}

#[test]
fn a_route_that_is_shorter_by_less_than_usual_queues_is_found() {
    for seed in 0..8 {
        let back = PathModel {
            route_changes: vec![((HOUR_S + 120) * NS, -70e-6)],
            ..queued()
        };
        let played = play([queued(), back], Vec::new(), seed);
        let found = played.calls(Event::RouteChange);
        let after_s = found.first().map(|at_s| at_s - HOUR_S - 120);
        assert!(
            after_s.is_some_and(|s| (0..32).contains(&s)),
            "seed {seed}: {:?}",
            played.calls
        );
    }
}

#[test]
fn a_jump_of_the_drift_seen_both_ways_is_followed_and_is_no_route_change() {
    for seed in 0..8 {
        let by = if seed % 2 == 0 { 4e-6 } else { -2e-6 };
        let upset = Upset {
            at_ns: (HOUR_S - 120) * NS,
            what: Disturbance::DriftJump(by),
        };
        let played = play([queued(), queued()], vec![upset], seed);
        let mistaken = played.calls(Event::RouteChange);
        assert_eq!(mistaken, [], "seed {seed}: {:?}", played.calls);
        assert!(played.worst_ppm < 0.3, "seed {seed}: {}", played.worst_ppm);
    }
}
