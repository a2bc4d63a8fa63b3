//! Measures the policy over simulated days: changes of ratio a day, worst phase error, overshoot
//! of the tube and slips, for headrooms, timestamp noises and wanders of the source clock. Beside
//! it the changes that always taking the nearest ratio would make (which bounds nothing), and the
//! fewest that somebody who knew the truth beforehand could have made.
//!
//! `cargo run --release -p ratewright-control --example hold_table -- [DAYS [SEEDS]]`
#![allow(clippy::print_stdout, reason = "an example prints its table")]

mod floor;
#[path = "../../tests/world/mod.rs"]
mod world;

use std::thread;

use floor::least_changes;
use ratewright_control::{CrossingDeclaration, CrossingState};
use ratewright_ratio::{Bounds, best, target_from_f64};
use ratewright_timing::sim::{ClockModel, Daily, Delay};
use world::{DAY, HOUR, SECOND, World, clock, crossing, crystal, id};

/// What is varied.
#[derive(Clone, Copy, Debug)]
struct Cell {
    source_hz: u64,
    headroom: f64,
    noise_s: f64,
    walk: f64,
    drift: f64,
}

/// What one run gave.
#[derive(Clone, Copy, Debug, Default)]
struct Run {
    changes_a_day: f64,
    /// The same for always taking the ratio nearest to the target.
    nearest_a_day: f64,
    /// The fewest that could have been.
    least_a_day: f64,
    worst: f64,
    degraded_share: f64,
    slipped: bool,
}

/// The first hour is the clock's warm-up: figures count from then on.
const SETTLED: i64 = HOUR;

fn run(cell: Cell, days: i64, seed: u64) -> Run {
    let mut world = World::new();
    world.add_exact("house", 48_000);
    let daily = Some(Daily {
        amplitude: 1e-6,
        angle: seed as f64,
    });
    let model = ClockModel {
        daily,
        ..crystal(cell.drift, cell.walk)
    };
    let delay = Delay::Normal {
        deviation_s: cell.noise_s,
    };
    world.add_seeded(
        clock("desk", cell.source_hz),
        model,
        delay,
        SECOND,
        7 * seed + 1,
    );
    let headroom_samples = cell.headroom;
    world.cross(CrossingDeclaration {
        headroom_samples,
        review_horizon_ns: DAY,
        ..crossing("x", "desk", "house")
    });
    world.run_until(SETTLED);
    world.forget();
    let (mut nearest, mut nearest_changes, mut curve) = (None, 0, Vec::new());
    while world.now < days * DAY {
        world.run_until(world.now + 10 * SECOND);
        let target = world
            .engine
            .status(&id("x"), world.now)
            .expect("it was declared")
            .target;
        let target = target_from_f64(target).expect("a target is positive");
        let best = best(&target, &Bounds::new(65_535, 65_535).expect("in range")).ratio;
        nearest_changes += usize::from(nearest.replace(best) != Some(best));
        curve.push(48_000.0 * world.gained_s("desk"));
    }
    let tally = world.tally("x");
    let per_day = |count: usize| count as f64 * DAY as f64 / (days * DAY - SETTLED) as f64;
    Run {
        changes_a_day: per_day(tally.changes.iter().filter(|(at, _)| *at > SETTLED).count()),
        nearest_a_day: per_day(nearest_changes),
        least_a_day: per_day(least_changes(&curve, cell.headroom)),
        worst: tally.worst,
        degraded_share: not_holding(&tally.states, days * DAY),
        slipped: tally.worst > cell.headroom,
    }
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

fn cells() -> Vec<Cell> {
    let mut cells = Vec::new();
    for (source_hz, headroom) in [(44_100, 0.5), (44_100, 4.0), (48_000, 4.0)] {
        for noise_s in [1e-6, 5e-6] {
            for walk in [1e-10, 1e-9] {
                for drift in [2e-6, 37.3e-6] {
                    cells.push(Cell {
                        source_hz,
                        headroom,
                        noise_s,
                        walk,
                        drift,
                    });
                }
            }
        }
    }
    cells
}

fn median(mut values: Vec<f64>) -> f64 {
    values.sort_by(f64::total_cmp);
    values[values.len() / 2]
}

fn report(cell: Cell, days: i64, seeds: u64) {
    let runs: Vec<Run> = thread::scope(|scope| {
        let halves = [0, 1].map(|half| {
            scope.spawn(move || -> Vec<Run> {
                (1..=seeds)
                    .filter(|seed| seed % 2 == half)
                    .map(|seed| run(cell, days, seed))
                    .collect()
            })
        });
        halves
            .into_iter()
            .flat_map(|half| half.join().expect("a run does not panic"))
            .collect()
    });
    let most = |of: fn(&Run) -> f64| runs.iter().map(of).fold(0.0, f64::max);
    let settings: Vec<f64> = runs.iter().map(|r| r.changes_a_day).collect();
    let worst = most(|r| r.worst);
    println!(
        "| {} | {} | {:.0} µs | {:.0e} | {:+.1} | {:.0} / {:.0} | {:.0} | {:.0} | {:.3} | {:+.1} % | {} | {:.2} % |",
        cell.source_hz,
        cell.headroom,
        cell.noise_s * 1e6,
        cell.walk,
        cell.drift * 1e6,
        median(settings),
        most(|r| r.changes_a_day),
        median(runs.iter().map(|r| r.least_a_day).collect()),
        median(runs.iter().map(|r| r.nearest_a_day).collect()),
        worst,
        (worst / (0.8 * cell.headroom) - 1.0) * 100.0,
        runs.iter().filter(|r| r.slipped).count(),
        most(|r| r.degraded_share) * 100.0,
    );
}

fn main() {
    let mut arguments = std::env::args().skip(1).map(|a| a.parse::<i64>());
    let days = arguments.next().and_then(Result::ok).unwrap_or(3);
    let seeds = arguments.next().and_then(Result::ok).unwrap_or(4) as u64;
    println!(
        "{seeds} seeds of {days} days; median / most changes a day; the tube is 0.8 of the headroom"
    );
    println!(
        "| source Hz | headroom | timestamps | walk /√s | drift ppm | changes a day, median / most | offline floor | always nearest to 65535 | worst abs φ | tube overshoot | runs with slips | not holding, at most |"
    );
    println!("| --- | --- | --- | --- | --- | --- | --- | --- | --- | --- | --- | --- |");
    for cell in cells() {
        report(cell, days, seeds);
    }
}
