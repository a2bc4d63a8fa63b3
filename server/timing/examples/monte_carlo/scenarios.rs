//! What is simulated: clocks, paths and probes of each row of the table. Invented figures,
//! drawn anew for each seed from ranges that are usual for computers and sound devices.

use num_rational::Ratio;
use ratewright_timing::sim::{
    Clock, ClockModel, Daily, Delay, Disturbance, Path, PathModel, Period, Random, Upset, WarmUp,
    Weather, probe,
};
use ratewright_timing::{LinkConfig, Measurement};

pub(crate) const NS: i64 = 1_000_000_000;

/// One row of the table, with the figures to match or beat.
pub(crate) struct Scenario {
    pub(crate) name: &'static str,
    pub(crate) duration_s: i64,
    pub(crate) interval_s: f64,
    pub(crate) kind: Kind,
    pub(crate) clock: Weathering,
    pub(crate) delay: DelayKind,
    /// RMSE ppm, ratio to the bound, coverage, coverage at start.
    pub(crate) wanted: [f64; 4],
    /// 95th percentiles of the time to 10, 1 and 0.1 ppm, s.
    pub(crate) wanted_times: [f64; 3],
}

#[derive(Clone, Copy, PartialEq)]
pub(crate) enum Kind {
    Counter,
    Exchange,
    SenderReport,
    Frequency,
}

#[derive(Clone, Copy, PartialEq)]
pub(crate) enum Weathering {
    Steady,
    Events,
    Thermal,
    Gaps,
    Everything,
}

#[derive(Clone, Copy, PartialEq)]
pub(crate) enum DelayKind {
    Gauss,
    Tails,
    GammaQueues,
    Asymmetric,
    Congested,
    Media,
}

const fn row(
    name: &'static str,
    duration_s: i64,
    interval_s: f64,
    model: (Kind, Weathering, DelayKind),
    wanted: [f64; 4],
    wanted_times: [f64; 3],
) -> Scenario {
    let (kind, clock, delay) = model;
    Scenario {
        name,
        duration_s,
        interval_s,
        kind,
        clock,
        delay,
        wanted,
        wanted_times,
    }
}

use DelayKind::{Asymmetric, Congested, GammaQueues, Gauss, Media, Tails};
use Kind::{Counter, Exchange, Frequency, SenderReport};
use Weathering::{Events, Everything, Gaps, Steady, Thermal};

/// All rows of the table.
pub(crate) const ALL: [Scenario; 12] = [
    row(
        "gauss",
        3600,
        0.1,
        (Counter, Steady, Gauss),
        [0.0025, 1.06, 0.971, 0.978],
        [3.0, 13.0, 106.0],
    ),
    row(
        "tails",
        14_400,
        1.0,
        (Counter, Steady, Tails),
        [0.0039, 1.04, 0.965, 0.984],
        [16.0, 55.0, 302.0],
    ),
    row(
        "fast",
        360,
        0.01,
        (Counter, Steady, Tails),
        [0.0080, 1.65, 0.999, 0.972],
        [2.0, 11.0, 74.0],
    ),
    row(
        "events",
        14_400,
        0.5,
        (Counter, Events, Tails),
        [0.0035, 1.06, 0.969, 0.985],
        [8.0, 27.0, 174.0],
    ),
    row(
        "gamma",
        14_400,
        1.0,
        (Exchange, Steady, GammaQueues),
        [0.0043, 1.32, 0.970, 0.990],
        [20.0, 94.0, 615.0],
    ),
    row(
        "asymmetric",
        14_400,
        1.0,
        (Exchange, Steady, Asymmetric),
        [0.0034, 1.08, 0.957, 0.973],
        [8.0, 42.0, 590.0],
    ),
    row(
        "congested",
        14_400,
        1.0,
        (Exchange, Steady, Congested),
        [0.0091, 3.21, 0.970, 0.982],
        [17.0, 66.0, 351.0],
    ),
    row(
        "reports",
        72_000,
        5.0,
        (SenderReport, Steady, Media),
        [0.0104, 1.15, 0.987, 0.991],
        [134.0, 494.0, 1383.0],
    ),
    row(
        "frequency",
        72_000,
        5.0,
        (Frequency, Steady, Gauss),
        [0.0136, 1.04, 0.975, 0.959],
        [0.0, 6.0, 484.0],
    ),
    row(
        "thermal",
        50_400,
        2.0,
        (Counter, Thermal, Tails),
        [0.0096, 2.45, 0.972, 0.896],
        [21.0, 50.0, 720.0],
    ),
    row(
        "gaps",
        216_000,
        6.0,
        (Counter, Gaps, Tails),
        [0.0126, 2.91, 0.973, 0.970],
        [24.0, 94.0, 418.0],
    ),
    row(
        "everything",
        86_400,
        2.0,
        (Exchange, Everything, Congested),
        [0.0118, 2.98, 0.993, 0.954],
        [16.0, 66.0, 751.0],
    ),
];

/// One simulated world: what a seed draws.
pub(crate) struct World {
    pub(crate) clock: Clock,
    pub(crate) model: ClockModel,
    pub(crate) paths: [PathModel; 2],
    out: Path,
    back: Path,
    random: Random,
    kind: Kind,
    nominal_hz: Ratio<u64>,
    reading_deviation: f64,
    interval_s: f64,
    /// Times of events of the clock or the path, ns.
    pub(crate) events: Vec<i64>,
    pub(crate) gaps: Vec<Period>,
    pub(crate) duration_ns: i64,
    at_ns: i64,
}

fn log_between(random: &mut Random, low: f64, high: f64) -> f64 {
    low * libm::exp(random.uniform() * libm::log(high / low))
}

impl World {
    pub(crate) fn new(scenario: &Scenario, seed: u64) -> World {
        let name = scenario
            .name
            .bytes()
            .fold(0u64, |h, b| h.wrapping_mul(31).wrapping_add(b.into()));
        let mut random = Random::new(seed.wrapping_mul(0x9e37).wrapping_add(name));
        let duration_ns = scenario.duration_s * NS;
        let mut model = clock_model(scenario, &mut random);
        let gaps = gaps(scenario, &mut random);
        let mut paths = [
            path_model(scenario.delay, &mut random),
            path_model(scenario.delay, &mut random),
        ];
        let mut events = Vec::new();
        if matches!(scenario.clock, Events | Everything) {
            model.upsets = upsets(duration_ns, &mut random);
            events.extend(model.upsets.iter().map(|u| u.at_ns));
        }
        if scenario.delay == Congested {
            congest(&mut paths, duration_ns, &mut random);
            events.extend(
                paths
                    .iter()
                    .flat_map(|p| p.route_changes.iter().map(|r| r.0)),
            );
        }
        for path in &mut paths {
            path.loss = 0.02;
            path.outages = gaps.clone();
        }
        events.sort_unstable();
        World {
            clock: Clock::new(model.clone(), random.bits()),
            out: Path::new(paths[0].clone(), random.bits()),
            back: Path::new(paths[1].clone(), random.bits()),
            kind: scenario.kind,
            nominal_hz: Ratio::from_integer(if random.chance(0.5) { 48_000 } else { 90_000 }),
            reading_deviation: log_between(&mut random, 0.02e-6, 0.2e-6),
            interval_s: scenario.interval_s,
            random,
            model,
            paths,
            events,
            gaps,
            duration_ns,
            at_ns: 0,
        }
    }

    pub(crate) fn config(&self) -> LinkConfig {
        LinkConfig::new(self.nominal_hz)
    }

    /// Tick of the counter, s; none where the measurement has none.
    pub(crate) fn tick_s(&self) -> f64 {
        match self.kind {
            Counter | SenderReport => 1.0 / *self.nominal_hz.numer() as f64,
            Exchange | Frequency => 1e-9,
        }
    }

    pub(crate) fn reading_deviation(&self) -> Option<f64> {
        (self.kind == Frequency).then_some(self.reading_deviation)
    }

    /// The next measurement, with the time at which it is there; `None` at the end.
    pub(crate) fn next(&mut self) -> Option<(i64, Option<Measurement>)> {
        let wait = self.interval_s * self.random.between(0.6, 1.4);
        self.at_ns += (wait * 1e9) as i64;
        let at_ns = self.at_ns;
        if at_ns > self.duration_ns {
            return None;
        }
        let clock = &mut self.clock;
        let m = match self.kind {
            Counter => probe::counter(clock, &mut self.out, self.nominal_hz, 32, at_ns),
            SenderReport => probe::sender_report(clock, &mut self.out, self.nominal_hz, 32, at_ns),
            Exchange => probe::exchange(clock, &mut self.out, &mut self.back, at_ns),
            Frequency => Some(probe::frequency(
                clock,
                &mut self.random,
                self.reading_deviation,
                at_ns,
            )),
        };
        Some((at_ns, m))
    }
}

fn clock_model(scenario: &Scenario, random: &mut Random) -> ClockModel {
    let mut model = ClockModel {
        drift: random.between(-100e-6, 100e-6),
        white_fm: log_between(random, 1e-19, 2e-18),
        walk_fm: log_between(random, 2e-21, 5e-20),
        ..ClockModel::crystal()
    };
    if matches!(scenario.clock, Thermal | Everything) {
        model.warm_up = Some(WarmUp {
            amplitude: random.between(2e-6, 6e-6) * if random.chance(0.5) { 1.0 } else { -1.0 },
            time_s: log_between(random, 400.0, 1500.0),
        });
    }
    if matches!(scenario.clock, Thermal | Gaps | Everything) {
        let angle = random.between(0.0, core::f64::consts::TAU);
        model.daily = Some(Daily {
            amplitude: random.between(0.2e-6, 1.2e-6),
            angle,
        });
        model.weather = Some(Weather {
            deviation: random.between(0.02e-6, 0.08e-6),
            time_s: log_between(random, 2000.0, 8000.0),
        });
        model.ageing_per_s = random.normal() * 1e-13;
    }
    model
}

fn path_model(kind: DelayKind, random: &mut Random) -> PathModel {
    let deviation_s = random.between(5e-6, 30e-6);
    let delay = match kind {
        Gauss => Delay::Normal { deviation_s },
        Tails => Delay::Tailed {
            deviation_s,
            share: random.between(0.05, 0.25),
            tail_s: random.between(50e-6, 200e-6),
            outliers: 0.003,
        },
        GammaQueues => Delay::Gamma {
            shape: random.between(1.2, 3.0),
            scale_s: random.between(20e-6, 150e-6),
            deviation_s: 2e-6,
        },
        Asymmetric => Delay::LogNormal {
            median_s: log_between(random, 30e-6, 300e-6),
            spread: random.between(0.5, 1.2),
            deviation_s: 2e-6,
        },
        Congested => Delay::Lomax {
            scale_s: random.between(40e-6, 160e-6),
            exponent: random.between(1.6, 3.0),
            correlation: random.between(0.1, 0.5),
            deviation_s: 2e-6,
        },
        Media => Delay::Gamma {
            shape: random.between(1.0, 2.0),
            scale_s: random.between(0.3e-3, 1.5e-3),
            deviation_s: random.between(30e-6, 150e-6),
        },
    };
    PathModel {
        least_s: random.between(100e-6, 2e-3),
        ..PathModel::new(delay)
    }
}

fn congest(paths: &mut [PathModel; 2], duration_ns: i64, random: &mut Random) {
    let at = |random: &mut Random, low: f64| (random.between(low, 0.9) * duration_ns as f64) as i64;
    for _ in 0..4 {
        let from_ns = at(random, 0.1);
        let to_ns = from_ns + (random.between(300.0, 900.0) * 1e9) as i64;
        let factor = random.between(4.0, 10.0);
        let path = &mut paths[random.chance(0.5) as usize];
        path.congestions.push((Period { from_ns, to_ns }, factor));
    }
    for _ in 0..2 {
        let by_s = random.between(200e-6, 900e-6) * if random.chance(0.7) { 1.0 } else { -1.0 };
        let path = &mut paths[random.chance(0.5) as usize];
        // Two of them leave some way to go.
        let by_s = by_s.max(-0.45 * path.least_s);
        path.route_changes.push((at(random, 0.25), by_s));
    }
}

fn upsets(duration_ns: i64, random: &mut Random) -> Vec<Upset> {
    (1..=4)
        .map(|i| {
            let at_ns =
                ((0.2 * i as f64 + random.between(-0.05, 0.05)) * duration_ns as f64) as i64;
            let sign = if random.chance(0.5) { 1.0 } else { -1.0 };
            let what = if i % 2 == 1 {
                Disturbance::DriftJump(sign * random.between(1e-6, 5e-6))
            } else {
                Disturbance::PhaseStep(sign * log_between(random, 2e-3, 0.2))
            };
            Upset { at_ns, what }
        })
        .collect()
}

fn gaps(scenario: &Scenario, random: &mut Random) -> Vec<Period> {
    if !matches!(scenario.clock, Gaps | Everything) {
        return Vec::new();
    }
    let day = scenario.clock == Gaps;
    let plan: &[(f64, i64)] = if day {
        &[
            (0.03, 72),
            (0.06, 3600),
            (0.11, 72),
            (0.2, 3600),
            (0.43, 86_400),
            (0.89, 3600),
        ]
    } else {
        &[(0.15, 72), (0.45, 3600), (0.75, 72)]
    };
    plan.iter()
        .map(|&(share, length_s)| {
            let from_s = (share + random.between(-0.005, 0.005)) * scenario.duration_s as f64;
            let from_ns = (from_s * 1e9) as i64;
            Period {
                from_ns,
                to_ns: from_ns + length_s * NS,
            }
        })
        .collect()
}
