//! Ratios of running times in one run, on one machine: `cargo bench -p ratewright-ratio`.
//!
//! The floor is the bare chain of integer divisions of the same continued fractions: as many divisions as the
//! search itself makes, each waiting for the one before, and nothing else.
//!
//! # Goals and what was measured
//!
//! `cargo bench -p ratewright-ratio` on two cores of a shared Zen 3 machine, each item alone, in quiet runs. With other
//! load on the machine the rows of few divisions and many instructions rise by a third, the floor does not.
//!
//! | | goal | measured |
//! | --- | --- | --- |
//! | best, f64 from 1/4 to 4, Q = 1024 | 1.5 x the floor | 1.41 to 1.51 (overlapped 2.1) |
//! | batch | 1/3 of one by one | 1/2.4, 1/2.9, 1/2.0 |
//! | certificate | 6 ns or 0.25 x the search | 10.5 to 11 ns, 0.27 x |
//! | simplest within 1e-6 | 1.2 x the floor | 1.5 to 1.6 (overlapped 2.6) |
//! | smooth look-up; build | 30 ns; 100 ms | 26 ns (overlapped 20); 30 to 75 ms |
//! | stages, least work | 100 µs | 15 to 100 µs |
//! | stages, whole front | 100 µs | 0.3 to 1.3 ms |
//!
//! What keeps some from their goals:
//!
//! - The floor is told how many divisions there are. A search finds out from the last one, and the processor
//!   mispredicts that branch once a call, whatever the rest of the code is. The rows "divisions that find their own end"
//!   do that and nothing else: 1.2 x the floor for the nearest. For the simplest it is 1.4 x, as one more division is
//!   needed where the two ends part.
//! - The batch is measured against a search that takes 1.4 x the floor itself. The longest of 16 chains decides for all,
//!   and values below 1/2, one of fifteen in the first family, are not exact in its doubles and searched one by one.
//! - The certificate takes five products, but some hundred instructions in all: those that take the claim apart, and one
//!   comparison for each hypothesis of the theorem.
#![allow(clippy::print_stdout, reason = "a benchmark prints")]
#![allow(clippy::disallowed_methods, reason = "a benchmark reads the clock")]

mod baselines;
mod measure;
mod targets;

use std::hint::black_box;

use measure::{Timing, compare};
use ratewright_ratio::{
    Best, Bounds, Claim, Exact, Fraction, Interval, Region, Side, SmoothTable, best, best_of_many,
    simplest, stages,
};

fn main() {
    println!("medians of interleaved rounds; trust the ratios, not the nanoseconds\n");
    nearest();
    many();
    certificates();
    simplest_in_intervals();
    smooth();
    stage_search();
}

fn bounds() -> Bounds {
    Bounds::new(1 << 20, 1_024).expect("in range")
}

fn nearest() {
    let bounds = bounds();
    for (name, targets) in targets::families() {
        let steps = baselines::steps_of_search(&targets, &bounds);
        let count = targets.len();
        let times = compare(
            &format!("best approximation, {name}"),
            count,
            &mut [
                Timing::new("floor: bare divisions", count, |i| {
                    baselines::division_chain(&targets[i], steps[i])
                }),
                Timing::new("divisions that find their own end", count, |i| {
                    baselines::chain_with_end(&targets[i], black_box(&bounds))
                }),
                Timing::new("best, Q = 1024", count, |i| {
                    *best(&targets[i], black_box(&bounds)).ratio.numer()
                }),
                Timing::new("num-rational, approximate_float_unsigned u16", count, |i| {
                    baselines::num_rational(&targets[i])
                }),
            ],
        );
        match baselines::cpython(&targets) {
            Some(ns) => println!(
                "    CPython limit_denominator(1024): {ns:.0} ns, {:.0} x best\n",
                ns / times[2]
            ),
            None => println!("    CPython limit_denominator: no python3 here, not measured\n"),
        }
    }
}

fn many() {
    let bounds = bounds();
    for (name, values) in targets::value_families() {
        let exact = targets::exact(&values);
        let count = values.len();
        let mut answers = vec![Fraction::new(1, 1); count];
        let times = compare(
            &format!("many at once, {name}"),
            count,
            &mut [Timing::new("best, one by one", count, |i| {
                *best(&exact[i], black_box(&bounds)).ratio.numer()
            })],
        );
        let ns = measure::median_of_passes(count, || {
            best_of_many(&values, black_box(&bounds), &mut answers).expect("positive values");
            *answers[count - 1].numer()
        });
        println!(
            "    best_of_many: {ns:.1} ns each, 1/{:.2} of one by one\n",
            times[0] / ns
        );
    }
}

fn certificates() {
    let bounds = bounds();
    let region = Region::from(&bounds);
    let targets = targets::uniform();
    let answers: Vec<Best> = targets.iter().map(|t| best(t, &bounds)).collect();
    let count = targets.len();
    let claim = |i: usize| Claim::Nearest {
        ratio: answers[i].ratio,
        target: &targets[i],
        region,
        side: Side::Either,
    };
    compare(
        "certificate",
        count,
        &mut [
            Timing::new("best, Q = 1024", count, |i| {
                *best(&targets[i], black_box(&bounds)).ratio.numer()
            }),
            Timing::new("its certificate checked", count, |i| {
                u64::from(answers[i].certificate.verify(&claim(i)).is_ok())
            }),
        ],
    );
}

fn simplest_in_intervals() {
    for (name, relative) in [("1e-6", 1_000_000), ("1e-4", 10_000)] {
        let intervals: Vec<Interval> = targets::uniform()
            .iter()
            .map(|t| targets::around(t, relative))
            .collect();
        let steps = baselines::steps_of_simplest(&intervals);
        let count = intervals.len();
        compare(
            &format!("simplest within ±{name}"),
            count,
            &mut [
                Timing::new("floor: bare divisions", count, |i| {
                    baselines::division_chain(intervals[i].lo(), steps[i])
                }),
                Timing::new("divisions that find their own end", count, |i| {
                    baselines::chain_of_interval(&intervals[i])
                }),
                Timing::new("simplest", count, |i| {
                    simplest(&intervals[i]).map_or(0, |answer| *answer.fraction.numer())
                }),
            ],
        );
    }
}

fn smooth() {
    let bounds = Bounds::new(1_000_000, 1_000_000)
        .and_then(|b| b.with_largest_prime(7))
        .expect("in range");
    let band = Interval::closed(Exact::new(1, 4), Exact::new(4, 1)).expect("not empty");
    let start = std::time::Instant::now();
    let table = SmoothTable::new(&bounds, &band);
    let built = start.elapsed();
    let targets = targets::uniform();
    let count = targets.len();
    compare(
        "primes up to 7, Q = 10^6, from 1/4 to 4",
        count,
        &mut [Timing::new("look-up", count, |i| {
            *table.best(&targets[i]).ratio.numer()
        })],
    );
    println!(
        "    {} ratios, built in {:.1} ms\n",
        table.len(),
        built.as_secs_f64() * 1e3
    );
}

fn stage_search() {
    let pairs = [
        (44_100.0, 160, 147),
        (48_000.0, 147, 160),
        (192_000.0, 147, 640),
        (44_100.0, 320, 147),
        (48_000.0, 1_001, 1_000),
    ];
    for (source_rate_hz, l, m) in pairs {
        let spec = stages::FilterSpec {
            source_rate_hz,
            passband_hz: 20_000.0,
            stopband_db: 120.0,
        };
        let ratio = Fraction::new(l, m);
        compare(
            &format!("stages of {l}/{m}"),
            1,
            &mut [
                Timing::new("least work", 1, |_| {
                    stages::least_work(black_box(ratio), &spec)
                        .map_or(0, |chain| chain.cost.coefficients)
                }),
                Timing::new("whole front", 1, |_| {
                    stages::front(black_box(ratio), &spec).map_or(0, |front| front.len() as u64)
                }),
            ],
        );
    }
}
