//! Verifies the stated error bounds over 10^9 output samples with integers of its own:
//! `cargo run --release -p ratewright-ratio --example cadence_billion [samples]`.
//!
//! The samples are shared out among 40 configurations: block-end cadences, lazy ones and steppings, near
//! 160/147, 147/160, 1/1 and 2/1, from −93 to +97 ppm. For each the error is recomputed here as
//! outputs·D − inputs·n, from nothing but the ratios that were served.
#![allow(clippy::print_stdout, reason = "it reports")]

use num_rational::Ratio;
use ratewright_ratio::{Bounds, Cadence, Exact, Fraction, Lazy, Stepping};

/// What was seen of one configuration.
struct Seen {
    samples: u64,
    /// Largest |error| as a part of the stated bound.
    worst: f64,
    violations: u64,
}

/// outputs − inputs·n/D, times D, kept exactly.
struct Account {
    n: i128,
    d: i128,
    outputs: i128,
    inputs: i128,
}

impl Account {
    fn new(wanted: &Exact) -> Self {
        let part = |x: u128| i128::try_from(x).expect("small");
        Self {
            n: part(*wanted.numer()),
            d: part(*wanted.denom()),
            outputs: 0,
            inputs: 0,
        }
    }

    fn error(&self) -> i128 {
        self.outputs * self.d - self.inputs * self.n
    }
}

fn main() {
    let total: u64 = std::env::args()
        .nth(1)
        .map_or(1_000_000_000, |text| text.parse().unwrap_or(1_000_000_000));
    let bounds = Bounds::new(1_024, 1_024).expect("in range");
    let nominal = [(160, 147), (147, 160), (1, 1), (2, 1)];
    let drifts_ppb = [-93_100, -20_030, -370, 1_009, 97_003];
    let each = total / (nominal.len() * drifts_ppb.len() * 2) as u64;
    let (mut samples, mut violations) = (0, 0);
    for (l, m) in nominal {
        for (index, drift_ppb) in drifts_ppb.into_iter().enumerate() {
            let parts = u128::try_from(1_000_000_000i64 + drift_ppb).expect("positive");
            let wanted = Exact::new(l * parts, m * 1_000_000_000);
            let cadence = Cadence::new(&wanted, &bounds);
            let first = match (cadence, index % 2) {
                (Ok(cadence), 0) => ("block ends", blocks(cadence, each)),
                (Ok(cadence), _) => ("lazy, 4 samples", lazily(cadence, each)),
                (Err(_), _) => ("one ratio", stepping(&wanted, 256, each)),
            };
            let second = ("stepping, 320 phases", stepping(&wanted, 320, each));
            for (form, seen) in [first, second] {
                println!(
                    "{l}/{m} {drift_ppb:+} ppb, {form}: {} samples, {} violations, worst {:.4} of the bound",
                    seen.samples, seen.violations, seen.worst
                );
                samples += seen.samples;
                violations += seen.violations;
            }
        }
    }
    println!("{samples} samples, {violations} violations of the stated bounds");
    if violations > 0 {
        std::process::exit(1);
    }
}

fn blocks(cadence: Cadence, samples: u64) -> Seen {
    let mut state = cadence.start();
    follow(cadence.wanted(), &cadence.error_bound(), samples, || {
        state.next_block()
    })
}

fn lazily(cadence: Cadence, samples: u64) -> Seen {
    let headroom = Exact::from_integer(4);
    let mut lazy = Lazy::new(cadence, &headroom).expect("4 samples are plenty");
    follow(cadence.wanted(), &headroom, samples, || lazy.next_block())
}

/// Blocks until enough samples are made; the error is looked at after each.
fn follow(wanted: &Exact, bound: &Exact, samples: u64, mut next: impl FnMut() -> Fraction) -> Seen {
    let mut account = Account::new(wanted);
    let limit = scaled(bound, account.d);
    let mut seen = Seen {
        samples: 0,
        worst: 0.0,
        violations: 0,
    };
    let mut worst = 0;
    while seen.samples < samples {
        let block = next();
        account.outputs += i128::from(*block.numer());
        account.inputs += i128::from(*block.denom());
        seen.samples += block.numer();
        worst = worst.max(account.error().abs());
        seen.violations += u64::from(Ratio::from_integer(account.error().abs()) > limit);
    }
    seen.worst = worst as f64 / (*limit.numer() as f64 / *limit.denom() as f64);
    seen
}

fn stepping(wanted: &Exact, phases: u64, samples: u64) -> Seen {
    let stepping = Stepping::new(wanted, phases).expect("more phases than outputs an input");
    let mut state = stepping.start();
    let mut account = Account::new(wanted);
    // Inputs are counted in phases here, so one output is worth L of them.
    let limit = scaled(&stepping.error_bound(), account.d * i128::from(phases));
    let limit = *limit.numer() / *limit.denom();
    let (mut worst, mut violations) = (0, 0);
    for _ in 0..samples {
        account.outputs += i128::from(phases);
        account.inputs += i128::from(state.next_output());
        let size = account.error().abs();
        worst = worst.max(size);
        violations += u64::from(size > limit);
    }
    Seen {
        samples,
        worst: worst as f64 / limit as f64,
        violations,
    }
}

fn scaled(bound: &Exact, by: i128) -> Ratio<i128> {
    let part = |x: u128| i128::try_from(x).expect("small");
    Ratio::new(part(*bound.numer()), part(*bound.denom())) * by
}
