//! One seed of one scene: days of simulated time.

use ratewright_control::{ClockDeclaration, CrossingDeclaration, CrossingState, Realised, Setting};
use ratewright_timing::sim::{ClockModel, Daily};

use crate::floor::least_changes;
use crate::rivals::{Nearest, Pair};
use crate::scene::{DRIFTS, Line, Scene};
use crate::world::{DAY, HOUR, SECOND, Tally, World, clock, crossing, crystal, id};

/// What one run gave for one crossing. Counts are a day.
#[derive(Clone, Copy, Debug, Default)]
pub(crate) struct Figures {
    /// Settings that change what is run, and those that only renew it.
    pub(crate) changes: f64,
    pub(crate) renewals: f64,
    /// Changes that the resampler makes by itself within a setting.
    pub(crate) switches_a_second: f64,
    /// The fewest changes that could have been.
    pub(crate) floor: f64,
    pub(crate) pair: f64,
    pub(crate) nearest: f64,
    pub(crate) worst: f64,
    pub(crate) slips: usize,
    /// Slips out of a crossing that said it holds.
    pub(crate) unforeseen: usize,
    /// Share of the time.
    pub(crate) not_holding: f64,
}

/// The first hour is the clock's warm-up: figures count from then on.
const SETTLED: i64 = HOUR;
const SINK_HZ: u64 = 48_000;
/// What a follower's gauge does: a report each half minute, a twentieth of a sample off.
const GAUGE: (i64, f64) = (30 * SECOND, 0.05);

/// Runs a scene for so many days.
pub(crate) fn run(scene: &Scene, days: i64, seed: u64) -> Vec<Figures> {
    let mut world = begin(scene, seed);
    world.run_until(SETTLED);
    world.forget();
    let bounds = crossing("x", "desk", "house").bounds;
    let mut nearest = Nearest::default();
    let mut pairs: Vec<Pair> = scene.lines.iter().map(|l| Pair::new(l.headroom)).collect();
    let (mut curve, mut gained_s) = (Vec::new(), world.gained_s("desk"));
    while world.now < days * DAY {
        let target = target(&world, scene);
        nearest.look(target);
        pairs.iter_mut().for_each(|pair| pair.look(target, &bounds));
        for _ in 0..10 {
            world.run_until(world.now + SECOND);
            let before_s = std::mem::replace(&mut gained_s, world.gained_s("desk"));
            let source_ticks = scene.source_hz as f64 * (1.0 + (gained_s - before_s));
            pairs
                .iter_mut()
                .for_each(|pair| pair.advance(source_ticks, SINK_HZ as f64));
        }
        curve.push(SINK_HZ as f64 * gained_s);
    }
    let per_day = |count: usize| count as f64 * DAY as f64 / (world.now - SETTLED) as f64;
    let figures = scene.lines.iter().zip(&pairs).enumerate();
    let figures = figures.map(|(i, (line, pair))| {
        let tally = world.tally(&name(i));
        let changes = tally.changes.iter().filter(|(at, _)| *at > SETTLED).count();
        let settings = tally.settings.iter().filter(|s| s.decided_ns > SETTLED);
        let unforeseen = tally.slips.iter().filter(|s| s.1 == CrossingState::Holding);
        Figures {
            changes: per_day(changes),
            renewals: per_day(settings.count() - changes),
            switches_a_second: switches_a_second(tally, world.now, scene.source_hz as f64),
            floor: per_day(least_changes(&curve, line.headroom)),
            pair: per_day(pair.changes),
            nearest: per_day(nearest.changes),
            worst: tally.worst,
            slips: tally.slips.len(),
            unforeseen: unforeseen.count(),
            not_holding: not_holding(&tally.states, world.now),
        }
    });
    figures.collect()
}

/// A wandering clock, ±1 ppm a day besides, into an exact one.
fn begin(scene: &Scene, seed: u64) -> World {
    let mut world = World::new();
    // The engine's own accounts are not compared with the truth here.
    world.next_compare_ns = i64::MAX;
    world.add_exact("house", SINK_HZ);
    let daily = Some(Daily {
        amplitude: 1e-6,
        angle: seed as f64,
    });
    let drift = DRIFTS[seed as usize % DRIFTS.len()];
    let model = ClockModel {
        daily,
        ..crystal(drift, scene.walk)
    };
    // Counts are latched as they change, so what is read steps by a nanosecond, not by a sample.
    let desk = ClockDeclaration {
        quantum_ns: 1,
        ..clock("desk", scene.source_hz)
    };
    world.add_read_by(desk, model, scene.path.clone(), SECOND, 7 * seed + 1);
    for (i, line) in scene.lines.iter().enumerate() {
        cross(&mut world, &name(i), line, seed);
    }
    world
}

fn cross(world: &mut World, name: &str, line: &Line, seed: u64) {
    world.cross(CrossingDeclaration {
        headroom_samples: line.headroom,
        review_horizon_ns: DAY,
        ..crossing(name, "desk", "house")
    });
    if line.levels {
        world.gauge(name, GAUGE.0, GAUGE.1, 7 * seed + 3);
    }
}

fn name(line: usize) -> String {
    format!("x{line}")
}

/// The target as it is estimated.
fn target(world: &World, scene: &Scene) -> f64 {
    let estimate = world.engine.estimate(&id("desk"), world.now);
    let drift = estimate.expect("it was declared").estimate.drift;
    SINK_HZ as f64 / (scene.source_hz as f64 * (1.0 + drift))
}

/// Share of the settled time in another state than holding.
fn not_holding(states: &[(i64, CrossingState)], end: i64) -> f64 {
    let ends = states.iter().skip(1).map(|(at, _)| *at).chain([end]);
    let out = states
        .iter()
        .zip(ends)
        .filter(|((_, state), _)| *state != CrossingState::Holding);
    let ns: i64 = out
        .map(|((from, _), to)| (to.max(SETTLED) - (*from).max(SETTLED)).max(0))
        .sum();
    ns as f64 / (end - SETTLED) as f64
}

/// Changes between the two ratios of the cadences that ran, a second.
fn switches_a_second(tally: &Tally, end: i64, source_hz: f64) -> f64 {
    let switches = |setting: &Setting| match setting.realised {
        Realised::Cadence(cadence) => cadence.switches_per_second(source_hz),
        _ => 0.0,
    };
    let later = tally.settings.iter().filter(|s| s.effect_ns > SETTLED);
    let ends = later.clone().skip(1).map(|s| s.effect_ns).chain([end]);
    let (mut count, mut ns) = (0.0, 0);
    for (setting, end_ns) in later.zip(ends) {
        count += switches(setting) * (end_ns - setting.effect_ns) as f64;
        ns += end_ns - setting.effect_ns;
    }
    count / (ns as f64).max(1.0)
}
