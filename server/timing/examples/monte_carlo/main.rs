//! The figures of the estimator over many seeds, beside those to match or beat, and beside
//! what a user would pick instead: `monte_carlo [SEEDS] [SCENARIO]`.
//!
//! Runs on all cores. The truth is the simulator's; the bound is the covariance of the best
//! filter that knows the wander, the noise and the events.
#![allow(
    clippy::disallowed_methods,
    clippy::print_stdout,
    reason = "an example is a shell around the pure crate: it prints, and uses all cores"
)]

mod bound;
mod figures;
mod rivals;
mod scenarios;
mod trial;

use std::thread;

use figures::{Figures, Tally};
use scenarios::{ALL, Scenario};

fn main() {
    let arguments: Vec<String> = std::env::args().skip(1).collect();
    let seeds: u64 = arguments
        .first()
        .and_then(|a| a.parse().ok())
        .unwrap_or(200);
    let only = arguments.get(1);
    println!("{}", Figures::HEADER);
    for scenario in ALL
        .iter()
        .filter(|s| only.is_none_or(|name| s.name == name))
    {
        let tally = run(scenario, seeds);
        println!("{}", tally.figures().line(scenario));
        for line in tally.extra_lines() {
            println!("{line}");
        }
    }
}

fn run(scenario: &'static Scenario, seeds: u64) -> Tally {
    let cores = thread::available_parallelism().map_or(1, |n| n.get() as u64);
    let workers: Vec<_> = (0..cores)
        .map(|worker| {
            thread::spawn(move || {
                let mut tally = Tally::default();
                for seed in (worker..seeds).step_by(cores as usize) {
                    tally.add(trial::run(scenario, seed));
                }
                tally
            })
        })
        .collect();
    let mut whole = Tally::default();
    for worker in workers {
        whole.join(worker.join().expect("a trial does not panic"));
    }
    whole
}
