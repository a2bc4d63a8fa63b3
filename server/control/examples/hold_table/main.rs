//! Measures the policy over simulated days: changes of setting a day, worst phase error, overshoot
//! of the tube and slips, by headroom, readings and wander of the source clock. Beside it what two
//! rivals would do, and the fewest changes that somebody who knew the truth could have made.
//!
//! `cargo run --release -p ratewright-control --example hold_table -- [SEEDS [DAYS]]`
#![allow(clippy::print_stdout, reason = "an example prints its table")]

mod floor;
mod rivals;
mod run;
mod scene;
#[path = "../../tests/world/mod.rs"]
mod world;

use std::sync::atomic::{AtomicU64, Ordering};
use std::thread;

use run::{Figures, run};
use scene::{Line, Scene, scenes};

/// All seeds of a scene, on all cores: for each line the figures of every seed.
fn run_all(scene: &Scene, days: i64, seeds: u64) -> Vec<Vec<Figures>> {
    let cores = thread::available_parallelism().map_or(1, |cores| cores.get());
    let next = AtomicU64::new(1);
    let work = || {
        let seeds = std::iter::from_fn(|| {
            let seed = next.fetch_add(1, Ordering::Relaxed);
            (seed <= seeds).then_some(seed)
        });
        seeds.map(|seed| run(scene, days, seed)).collect::<Vec<_>>()
    };
    let runs: Vec<Vec<Figures>> = thread::scope(|scope| {
        let workers: Vec<_> = (0..cores).map(|_| scope.spawn(work)).collect();
        let joined = workers.into_iter().map(|worker| worker.join());
        joined
            .flat_map(|runs| runs.expect("a run does not panic"))
            .collect()
    });
    let of_line = |line: usize| runs.iter().map(|run| run[line]).collect();
    (0..scene.lines.len()).map(of_line).collect()
}

/// The middle one, and the upper of the middle two.
fn median(mut values: Vec<f64>) -> f64 {
    values.sort_by(f64::total_cmp);
    values[values.len() / 2]
}

fn report(scene: &Scene, line: &Line, runs: &[Figures]) {
    let middle = |of: fn(&Figures) -> f64| median(runs.iter().map(of).collect());
    let most = |of: fn(&Figures) -> f64| runs.iter().map(of).fold(0.0, f64::max);
    let worst = most(|r| r.worst);
    let slips: usize = runs.iter().map(|r| r.slips).sum();
    let unforeseen: usize = runs.iter().map(|r| r.unforeseen).sum();
    println!(
        "| {} | {} | {:.0e} | {}{} | {:.0} / {:.0} | {:.1} | {:.1} | {:.0} | {:.0} | {:.0} | {:.3} | {:+.1} % | {} | {:.2} % |",
        scene.source_hz,
        scene.label,
        scene.walk,
        line.headroom,
        if line.levels { ", levels" } else { "" },
        middle(|r| r.changes),
        most(|r| r.changes),
        middle(|r| r.renewals),
        middle(|r| r.switches_a_second),
        middle(|r| r.floor),
        middle(|r| r.pair),
        middle(|r| r.nearest),
        worst,
        (worst / (0.8 * line.headroom) - 1.0) * 100.0,
        if slips == 0 {
            "0".to_owned()
        } else {
            format!("{slips}, {unforeseen} unforeseen")
        },
        most(|r| r.not_holding) * 100.0,
    );
}

fn main() {
    let mut arguments = std::env::args().skip(1).map(|a| a.parse::<i64>());
    let seeds = arguments.next().and_then(Result::ok).unwrap_or(4) as u64;
    let days = arguments.next().and_then(Result::ok).unwrap_or(2);
    println!("{seeds} seeds of {days} days; the tube is 0.8 of the headroom");
    println!();
    println!(
        "| source Hz | readings | walk /√s | headroom | settings a day, median / most | renewals a day | cadence switches a second | floor | pair with hysteresis | always nearest | worst abs φ | tube overshoot | slips | not holding, at most |"
    );
    println!(
        "| --- | --- | --- | --- | --- | --- | --- | --- | --- | --- | --- | --- | --- | --- |"
    );
    for scene in scenes() {
        for (line, runs) in scene.lines.iter().zip(run_all(&scene, days, seeds)) {
            report(&scene, line, &runs);
        }
    }
}
