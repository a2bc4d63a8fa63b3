//! What events cost and what the state weighs, at 10², 10⁴ and 10⁶ crossings:
//! `cargo bench -p ratewright-control`, or with `-- MOST` for fewer than 10⁶.
//!
//! Work must be flat: the last line of each column is its ratio to the first.
#![allow(
    clippy::disallowed_methods,
    clippy::print_stdout,
    reason = "a benchmark is a shell around the pure crate: it times and prints"
)]

mod facility;
mod memory;
mod steps;

use std::time::Instant;

use facility::{CROSSINGS_A_CLOCK, Facility};

#[global_allocator]
static ALLOCATOR: memory::Counting = memory::Counting;

const SIZES: [usize; 3] = [100, 10_000, 1_000_000];
/// Most readings that are timed, and most seconds of them.
const TIMED: (usize, usize) = (100_000, 400);
/// Readings whose instructions are counted, and crossings.
const COUNTED: (usize, usize) = (16, 64);

/// What is measured at one size.
struct Figures {
    crossings: usize,
    readings_a_second: f64,
    decisions_a_second: f64,
    steps_a_reading: Option<f64>,
    steps_a_decision: Option<f64>,
    bytes_a_clock: f64,
    bytes_a_link: f64,
    bytes_a_crossing: f64,
}

fn measure(crossings: usize) -> Figures {
    let clocks = crossings.div_ceil(CROSSINGS_A_CLOCK);
    let bytes_of = |count: usize, before: u64| (memory::held() - before) as f64 / count as f64;
    let mut facility = Facility::new(clocks);
    let before = memory::held();
    facility.declare();
    // Each source has a sink of its own.
    let bytes_a_clock = bytes_of(2 * clocks, before);
    let before = memory::held();
    facility.warm_up();
    let bytes_a_link = bytes_of(clocks, before);
    let before = memory::held();
    facility.cross(crossings);
    let bytes_a_crossing = bytes_of(crossings, before);

    facility.settle();
    let steps_a_decision = steps::count(|| facility.decide_once());
    let begun = Instant::now();
    let decided = facility.decide_all();
    let decisions_a_second = decided as f64 / begun.elapsed().as_secs_f64();
    // Now nothing is due, so that a reading is all that its event does.
    let steps_a_reading = steps::count(|| facility.read(COUNTED.0));
    let timed = TIMED.0.min(TIMED.1 * clocks);
    let begun = Instant::now();
    facility.read(timed);
    let readings_a_second = timed as f64 / begun.elapsed().as_secs_f64();
    Figures {
        crossings,
        readings_a_second,
        decisions_a_second,
        steps_a_reading: steps_a_reading.map(|steps| steps as f64 / COUNTED.0 as f64),
        steps_a_decision: steps_a_decision.map(|steps| steps as f64 / COUNTED.1 as f64),
        bytes_a_clock,
        bytes_a_link,
        bytes_a_crossing,
    }
}

fn show(figures: &Figures) {
    let steps = |steps: Option<f64>| steps.map_or("-".to_owned(), |steps| format!("{steps:.0}"));
    println!(
        "{:>9}  {:>10.0}  {:>12}  {:>11.0}  {:>12}  {:>7.0}  {:>6.0}  {:>10.0}",
        figures.crossings,
        figures.readings_a_second,
        steps(figures.steps_a_reading),
        figures.decisions_a_second,
        steps(figures.steps_a_decision),
        figures.bytes_a_clock,
        figures.bytes_a_link,
        figures.bytes_a_crossing,
    );
}

fn main() {
    let most = std::env::args().skip(1).find_map(|a| a.parse().ok());
    println!("instructions are counted in user mode, one by one; bytes as asked of the allocator");
    println!(
        "crossings  readings/s  instructions  decisions/s  instructions  B/clock  B/link  B/crossing"
    );
    let sizes = SIZES
        .into_iter()
        .filter(|&n| n <= most.unwrap_or(usize::MAX));
    let all: Vec<Figures> = sizes
        .map(|crossings| {
            let figures = measure(crossings);
            show(&figures);
            figures
        })
        .collect();
    if let [first, .., last] = all.as_slice() {
        let ratio = |of: fn(&Figures) -> Option<f64>| match (of(first), of(last)) {
            (Some(first), Some(last)) => format!("{:.2}x", last / first),
            _ => "-".to_owned(),
        };
        println!(
            "last to first: time of a reading {:.2}x, its instructions {}; time of a decision {:.2}x, its \
             instructions {}",
            first.readings_a_second / last.readings_a_second,
            ratio(|f| f.steps_a_reading),
            first.decisions_a_second / last.decisions_a_second,
            ratio(|f| f.steps_a_decision),
        );
    }
}
