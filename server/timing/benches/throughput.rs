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
const CHUNK: usize = 1000;
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

/// Measurements a second, undisturbed: every thousand is timed on its own, in sixty runs, and
/// the fastest time of each is summed.
fn rate<S>(
    readings: &[Measurement],
    begin: impl Fn() -> S,
    mut take: impl FnMut(&mut S, &[Measurement]),
) -> f64 {
    let mut fastest = vec![f64::INFINITY; readings.len().div_ceil(CHUNK)];
    for _ in 0..60 {
        let mut state = begin();
        for (chunk, fastest) in readings.chunks(CHUNK).zip(&mut fastest) {
            let begun = Instant::now();
            take(&mut state, chunk);
            *fastest = fastest.min(begun.elapsed().as_secs_f64());
        }
        black_box(state);
    }
    readings.len() as f64 / fastest.iter().sum::<f64>()
}

fn begin_link() -> (Link, u64) {
    let config = LinkConfig::new(Ratio::from_integer(48_000));
    (Link::new(config).expect("a valid declaration"), 0)
}

fn estimate((link, sequence): &mut (Link, u64), readings: &[Measurement]) {
    for m in readings {
        link.observe(*sequence, m).expect("a simulated reading");
        *sequence += 1;
    }
}

/// The baseline's state: phase and drift with their covariance, the last time, the first value.
struct Plain {
    x: f64,
    y: f64,
    xx: f64,
    xy: f64,
    yy: f64,
    last: f64,
    first: Option<f64>,
}

fn begin_plain() -> Plain {
    Plain {
        x: 0.0,
        y: 0.0,
        xx: 1e10,
        xy: 0.0,
        yy: 3600.0,
        last: 0.0,
        first: None,
    }
}

/// The baseline: phase and drift, fixed noise, no gating, floating-point counters.
fn plain_kalman(state: &mut Plain, readings: &[Measurement]) {
    let Plain {
        x,
        y,
        xx,
        xy,
        yy,
        last,
        first,
    } = state;
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
        let dt = t - *last;
        *last = t;
        *x += dt * *y;
        *xx += dt * (2.0 * *xy + dt * *yy) + 1e-6 * dt + 1e-8 * dt * dt * dt / 3.0;
        *xy += dt * *yy + 0.5e-8 * dt * dt;
        *yy += 1e-8 * dt;
        let s = *xx + 400.0;
        let (kx, ky) = (*xx / s, *xy / s);
        let e = z - *x;
        *x += kx * e;
        *y += ky * e;
        *yy -= ky * *xy;
        *xy -= kx * *xy;
        *xx -= kx * *xx;
    }
}

fn main() {
    let ([one_way, two_way], intake) = hot_state_bytes();
    println!("kind      measurements/s   plain Kalman/s   ratio   hot state");
    for (name, is_two_way, bytes) in [("one-way", false, one_way), ("two-way", true, two_way)] {
        let readings = readings(is_two_way);
        let own = rate(&readings, begin_link, estimate);
        let plain = rate(&readings, begin_plain, plain_kalman);
        println!(
            "{name}   {own:>12.0}   {plain:>14.0}   1/{:.0}   {bytes} bytes",
            plain / own
        );
    }
    println!("intake    {intake} bytes besides, of integers to check and unwrap by");
    println!("link      {} bytes in all", size_of::<Link>());
}
