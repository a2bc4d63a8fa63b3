//! Interleaved rounds, so that a slow moment of the machine hits all alike, and two ways to count.
//!
//! *Alone*: each item waits for the answer before it, as a caller does who acts on the answer. *Overlapped*: the
//! processor may begin an item before it has ended the last, as in a loop over many targets.

use std::hint::black_box;
use std::time::Instant;

const ROUNDS: usize = 40;

/// Something to be timed, item by item.
pub(crate) struct Timing<'a> {
    name: &'static str,
    alone: Box<dyn Fn() -> u64 + 'a>,
    overlapped: Box<dyn Fn() -> u64 + 'a>,
    rounds_ns: [Vec<f64>; 2],
}

impl<'a> Timing<'a> {
    /// Work on items 0 to `items` − 1; what it gives is only to keep the work from being left out.
    pub(crate) fn new(
        name: &'static str,
        items: usize,
        work: impl Fn(usize) -> u64 + Copy + 'a,
    ) -> Self {
        let alone = move || {
            let never = black_box(0);
            (0..items).fold(0u64, |sum, i| {
                sum.wrapping_add(work(i + (sum as usize & never)))
            })
        };
        let overlapped = move || (0..items).fold(0u64, |sum, i| sum.wrapping_add(work(i)));
        let rounds_ns = [Vec::new(), Vec::new()];
        Self {
            name,
            alone: Box::new(alone),
            overlapped: Box::new(overlapped),
            rounds_ns,
        }
    }
}

/// Nanoseconds of one item.
fn once(items: usize, work: &dyn Fn() -> u64) -> f64 {
    let start = Instant::now();
    black_box(work());
    start.elapsed().as_nanos() as f64 / items as f64
}

fn median(rounds: &mut [f64]) -> f64 {
    rounds.sort_by(f64::total_cmp);
    rounds[rounds.len() / 2]
}

/// The median over whole passes, in ns an item.
pub(crate) fn median_of_passes(items: usize, mut pass: impl FnMut() -> u64) -> f64 {
    let timed = |_| {
        let start = Instant::now();
        black_box(pass());
        start.elapsed().as_nanos() as f64 / items as f64
    };
    median(&mut (0..ROUNDS).map(timed).collect::<Vec<_>>())
}

/// Times all in turn, prints each as a ratio to the first, and returns the ns of each alone.
pub(crate) fn compare(title: &str, items: usize, timings: &mut [Timing<'_>]) -> Vec<f64> {
    for _ in 0..ROUNDS {
        for timing in timings.iter_mut() {
            timing.rounds_ns[0].push(once(items, &timing.alone));
            timing.rounds_ns[1].push(once(items, &timing.overlapped));
        }
    }
    println!("{title:<48}       alone              overlapped");
    let mut bases = None;
    let mut alone = Vec::new();
    for timing in timings.iter_mut() {
        let [one, many] = &mut timing.rounds_ns;
        let (one, many) = (median(one), median(many));
        let (base_one, base_many) = *bases.get_or_insert((one, many));
        let (x_one, x_many) = (one / base_one, many / base_many);
        println!(
            "    {:<44} {one:8.1} ns {x_one:6.2} x {many:8.1} ns {x_many:6.2} x",
            timing.name
        );
        alone.push(one);
    }
    println!();
    alone
}
