//! Measurements a second on one core, against a plain two-state Kalman update in the same run,
//! and the bytes of state: `cargo bench -p ratewright-timing`.
#![allow(
    clippy::disallowed_methods,
    clippy::print_stdout,
    reason = "a benchmark is a shell around the pure crate: it times and prints"
)]

use std::hint::black_box;
use std::time::Instant;

use num_rational::Ratio;
use ratewright_timing::sim::{Clock, ClockModel, Delay, Path, PathModel, probe};
use ratewright_timing::{Link, LinkConfig, Measurement, hot_state_bytes};

const ROWS: i64 = 20_000;
const NS: i64 = 1_000_000_000;

fn readings(two_way: bool) -> Vec<Measurement> {
    let hz = Ratio::from_integer(48_000);
    let mut clock = Clock::new(
        ClockModel {
            drift: 20e-6,
            ..ClockModel::crystal()
        },
        1,
    );
    let delay = Delay::Tailed {
        deviation_s: 10e-6,
        share: 0.2,
        tail_s: 100e-6,
        outliers: 0.003,
    };
    let model = PathModel {
        least_s: 1e-3,
        ..PathModel::new(delay)
    };
    let mut out = Path::new(model.clone(), 2);
    let mut back = Path::new(model, 3);
    (1..=ROWS)
        .filter_map(|i| {
            if two_way {
                probe::exchange(&mut clock, &mut out, &mut back, i * NS)
            } else {
                probe::counter(&mut clock, &mut out, hz, 32, i * NS)
            }
        })
        .collect()
}

/// Fastest of sixty short runs, measurements a second.
fn rate(readings: &[Measurement], mut run: impl FnMut(&[Measurement])) -> f64 {
    let mut best = f64::INFINITY;
    for _ in 0..60 {
        let begin = Instant::now();
        run(readings);
        best = best.min(begin.elapsed().as_secs_f64());
    }
    readings.len() as f64 / best
}

fn estimator(readings: &[Measurement]) {
    let hz = Ratio::from_integer(48_000);
    let mut link = Link::new(LinkConfig::new(hz)).expect("a valid declaration");
    for (i, m) in readings.iter().enumerate() {
        link.observe(i as u64, m).expect("a simulated reading");
    }
    black_box(link.estimate(ROWS * NS));
}

/// The baseline: phase and drift, fixed noise, no gating, floating-point counters.
fn plain_kalman(readings: &[Measurement]) {
    let (mut x, mut y, mut last) = (0.0, 0.0, 0.0);
    let (mut xx, mut xy, mut yy) = (1e10, 0.0, 3600.0);
    let mut first = None;
    for m in readings {
        let (clock, reference) = match *m {
            Measurement::Counter {
                count,
                reference_ns,
                ..
            } => (count as f64 / 0.048, reference_ns),
            Measurement::Exchange {
                t1_ns,
                t2_ns,
                t3_ns,
                t4_ns,
            } => (0.5e-3 * (t1_ns + t4_ns) as f64, (t2_ns + t3_ns) / 2),
            _ => continue,
        };
        let z = clock - reference as f64 * 1e-3;
        let z = z - *first.get_or_insert(z);
        let t = reference as f64 * 1e-9;
        let dt = t - last;
        last = t;
        x += dt * y;
        xx += dt * (2.0 * xy + dt * yy) + 1e-6 * dt + 1e-8 * dt * dt * dt / 3.0;
        xy += dt * yy + 0.5e-8 * dt * dt;
        yy += 1e-8 * dt;
        let s = xx + 400.0;
        let (kx, ky) = (xx / s, xy / s);
        let e = z - x;
        x += kx * e;
        y += ky * e;
        yy -= ky * xy;
        xy -= kx * xy;
        xx -= kx * xx;
    }
    black_box((x, y, xx, xy, yy));
}

fn main() {
    let ([one_way, two_way], evidence) = hot_state_bytes();
    println!("kind      measurements/s   plain Kalman/s   ratio   hot state");
    for (name, is_two_way, bytes) in [("one-way", false, one_way), ("two-way", true, two_way)] {
        let readings = readings(is_two_way);
        let own = rate(&readings, estimator);
        let plain = rate(&readings, plain_kalman);
        println!(
            "{name}   {own:>12.0}   {plain:>14.0}   1/{:.0}   {bytes} bytes",
            plain / own
        );
    }
    println!("evidence  {evidence} bytes besides, for each direction");
    println!("link      {} bytes in all", size_of::<Link>());
}
