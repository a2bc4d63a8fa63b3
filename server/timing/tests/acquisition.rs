//! From the first reading to the lock and through a gap, on simulated clocks.

use num_rational::Ratio;
use ratewright_timing::sim::{Clock, ClockModel, Delay, Path, PathModel, Period, probe};
use ratewright_timing::{Estimate, Link, LinkConfig, Outcome, Reason, State};

const NS: i64 = 1_000_000_000;

struct World {
    clock: Clock,
    path: Path,
    link: Link,
    nominal_hz: Ratio<u64>,
    at_ns: i64,
    sequence: u64,
}

impl World {
    fn new(seed: u64, path: PathModel) -> Self {
        let nominal_hz = Ratio::from_integer(48_000);
        let model = ClockModel {
            drift: 37e-6,
            ..ClockModel::crystal()
        };
        World {
            clock: Clock::new(model, seed),
            path: Path::new(path, seed + 1000),
            link: Link::new(LinkConfig::new(nominal_hz)).unwrap(),
            nominal_hz,
            at_ns: 0,
            sequence: 0,
        }
    }

    /// Reads every `interval_ns` until a time.
    fn feed(&mut self, interval_ns: i64, until_ns: i64) {
        while self.at_ns < until_ns {
            self.at_ns += interval_ns;
            let reading = probe::counter(
                &mut self.clock,
                &mut self.path,
                self.nominal_hz,
                32,
                self.at_ns,
            );
            if let Some(reading) = reading {
                self.link.observe(self.sequence, &reading).unwrap();
                self.sequence += 1;
            }
        }
    }

    /// The same; gives each estimate with the true drift.
    fn run(&mut self, interval_ns: i64, until_ns: i64, mut see: impl FnMut(&Estimate, f64)) {
        while self.at_ns < until_ns {
            self.feed(interval_ns, self.at_ns + interval_ns);
            let e = self.link.estimate(self.at_ns);
            see(&e, self.clock.drift(self.at_ns));
        }
    }
}

fn jitter(deviation_s: f64) -> PathModel {
    PathModel::new(Delay::Normal { deviation_s })
}

/// First time within a minute, s, at which an estimate passes.
fn first_time(world: &mut World, interval_ns: i64, passes: impl Fn(&Estimate) -> bool) -> f64 {
    let mut first = None;
    world.run(interval_ns, 60 * NS, |e, _| {
        if first.is_none() && passes(e) {
            first = Some(e.as_of_ns as f64 / 1e9);
        }
    });
    first.expect("it passes within the minute")
}

#[test]
fn is_past_free_running_within_seconds_of_jittery_readings() {
    // Physics sets the time: n readings of jitter σ over T seconds fix the drift to σ√(12/n)/T.
    for (interval_ns, jitter_s, within_s) in [
        (NS / 10, 100e-6, 15.0),
        (NS / 5, 100e-6, 20.0),
        (NS, 100e-6, 45.0),
        (NS, 20e-6, 20.0),
    ] {
        for seed in 0..10 {
            let mut world = World::new(seed, jitter(jitter_s));
            let time = first_time(&mut world, interval_ns, |e| e.state != State::FreeRunning);
            assert!(
                time <= within_s,
                "{time} s at seed {seed}, interval {interval_ns} ns"
            );
        }
    }
}

#[test]
fn locks_about_when_it_said_it_would() {
    for after_s in [10.0, 60.0, 200.0] {
        let median = median_lock_over_promise(after_s);
        assert!((0.5..2.0).contains(&median), "{median} after {after_s} s");
    }
}

/// Time of the lock over the time promised after so many seconds: median over seeds.
fn median_lock_over_promise(after_s: f64) -> f64 {
    let mut ratios = Vec::new();
    for seed in 0..20 {
        let mut world = World::new(seed, jitter(50e-6));
        let mut promise = None;
        let mut lock = None;
        world.run(NS, 3600 * NS, |e, _| {
            let now_s = e.as_of_ns as f64 / 1e9;
            if now_s >= after_s && promise.is_none() {
                promise = e.lock_expected_in_s.map(|s| now_s + s);
            }
            if lock.is_none() && e.state == State::Locked {
                lock = Some(now_s);
            }
        });
        ratios.push(lock.expect("locks within the hour") / promise.expect("foreseeable"));
    }
    ratios.sort_by(f64::total_cmp);
    ratios[10]
}

#[test]
fn a_locked_estimate_is_as_good_as_it_says() {
    let (mut locked, mut true_claims, mut covered) = (0, 0, 0);
    for seed in 0..12 {
        let mut world = World::new(seed, jitter(50e-6));
        world.run(NS, 3600 * NS, |e, truth| {
            if e.state == State::Locked {
                locked += 1;
                true_claims += ((e.drift - truth).abs() <= 1.5e-7) as u32;
                covered += (e.low <= truth && truth <= e.high) as u32;
            }
        });
    }
    assert!(locked > 12 * 1800, "{locked}");
    assert!(
        true_claims as f64 >= 0.97 * locked as f64,
        "{true_claims} of {locked}"
    );
    assert!(
        covered as f64 >= 0.93 * locked as f64,
        "{covered} of {locked}"
    );
}

/// The drift of a plain crystal changes by tenths of a ppm in an hour, and slopes of the first
/// minutes, when they were hardly known, are no evidence of more.
#[test]
fn the_interval_after_an_hour_without_readings_is_of_use() {
    for seed in 0..8 {
        let outage = Period {
            from_ns: 10_800 * NS,
            to_ns: 14_400 * NS,
        };
        let path = PathModel {
            outages: vec![outage],
            ..jitter(20e-6)
        };
        let mut world = World::new(seed, path);
        world.feed(6 * NS, 14_394 * NS);
        let e = world.link.estimate(world.at_ns);
        let truth = world.clock.drift(world.at_ns);
        assert!(e.low <= truth && truth <= e.high, "seed {seed}: {e:?}");
        assert!(e.half_width() < 0.6e-6, "seed {seed}: {}", e.half_width());
    }
}

#[test]
fn a_gap_is_holdover_and_the_interval_only_grows() {
    let outage = Period {
        from_ns: 1800 * NS,
        to_ns: 9000 * NS,
    };
    let path = PathModel {
        outages: vec![outage],
        ..jitter(20e-6)
    };
    let mut world = World::new(3, path);
    world.feed(NS, 1799 * NS);
    let before = world.link.estimate(world.at_ns);
    assert_eq!(
        (before.state, before.reason),
        (State::Locked, Reason::WithinThreshold)
    );
    let mut width = before.half_width();
    world.run(60 * NS, 8900 * NS, |e, truth| {
        assert_eq!(
            (e.state, e.reason),
            (State::Holdover, Reason::ReadingsStopped)
        );
        assert!(
            e.half_width() >= width,
            "narrower than before at {} ns",
            e.as_of_ns
        );
        assert!(e.low <= truth && truth <= e.high);
        width = e.half_width();
    });
    world.feed(NS, 9300 * NS);
    assert_eq!(world.link.estimate(world.at_ns).state, State::Locked);
    let changes: Vec<_> = world
        .link
        .history()
        .transitions()
        .map(|t| (t.to, t.reason))
        .collect();
    assert_eq!(
        changes[..2],
        [
            (State::Acquiring, Reason::Narrowing),
            (State::Locked, Reason::WithinThreshold),
        ]
    );
    assert!(
        changes.contains(&(State::Holdover, Reason::ReadingsStopped)),
        "{changes:?}"
    );
}

#[test]
fn states_do_not_flutter() {
    for (seed, jitter_s) in [
        (1, 5e-6),
        (2, 20e-6),
        (3, 50e-6),
        (4, 100e-6),
        (5, 150e-6),
        (6, 200e-6),
    ] {
        let mut world = World::new(seed, jitter(jitter_s));
        world.feed(NS, 2 * 3600 * NS);
        let changes: Vec<_> = world.link.history().transitions().collect();
        assert!(changes.len() <= 4, "jitter {jitter_s}: {changes:?}");
        for change in changes {
            let enters = change.to == State::Locked;
            assert!(!enters || (change.half_width <= 1e-7 / 1.3 && change.rows_used >= 64));
        }
    }
}

#[test]
fn the_forecast_at_no_horizon_is_the_estimate() {
    let mut world = World::new(4, jitter(20e-6));
    world.run(NS, 900 * NS, |e, _| {
        let now = e.drift_deviation_after(0.0);
        assert!(
            (now - e.deviation).abs() <= 1e-9 * e.deviation + 1e-18,
            "{now} {}",
            e.deviation
        );
        assert!(e.phase_growth_deviation_s(100.0) >= 0.999 * 100.0 * e.deviation);
    });
}

#[test]
fn phase_strays_from_the_forecast_no_more_than_it_says() {
    for tau_s in [10, 300, 3600] {
        let seeds = 60;
        let mut within = 0;
        for seed in 0..seeds {
            let mut world = World::new(seed, jitter(20e-6));
            world.feed(NS, 600 * NS);
            let e = world.link.estimate(world.at_ns);
            let before_s = world.clock.phase_s(world.at_ns);
            let after_s = world.clock.phase_s(world.at_ns + tau_s * NS);
            let strayed = after_s - before_s - e.drift * tau_s as f64;
            within += (strayed.abs() <= 1.96 * e.phase_growth_deviation_s(tau_s as f64)) as u32;
        }
        assert!(
            within as f64 >= 0.92 * seeds as f64,
            "{within} of {seeds} over {tau_s} s"
        );
    }
}

#[test]
fn duplicates_and_late_comers_are_stale() {
    let mut world = World::new(5, jitter(20e-6));
    world.feed(NS, 100 * NS);
    let before = world.link.clone();
    let old = probe::counter(
        &mut world.clock,
        &mut world.path,
        world.nominal_hz,
        32,
        101 * NS,
    );
    assert_eq!(world.link.observe(3, &old.unwrap()), Ok(Outcome::Stale));
    assert_eq!(world.link, before);
}
