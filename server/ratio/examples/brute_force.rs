//! The properties of the brute-force tests over many more cases, on all cores:
//! `cargo run --release -p ratewright-ratio --example brute_force [cases]` (10^8 by default).
#![allow(clippy::print_stdout, reason = "it reports")]
#![allow(
    clippy::disallowed_methods,
    reason = "not part of the pure crate: it uses every core and a clock"
)]

#[path = "../tests/brute_force/oracle.rs"]
mod oracle;
#[path = "../tests/brute_force/properties.rs"]
mod properties;
#[path = "../tests/brute_force/random.rs"]
mod random;

use std::time::Instant;

use properties::PROPERTIES;
use random::Random;

fn main() {
    let total: u64 = match std::env::args().nth(1).map(|text| text.parse()) {
        None => 100_000_000,
        Some(Ok(cases)) => cases,
        Some(Err(error)) => {
            println!("cases: {error}; accepted is a whole number such as 100000000");
            std::process::exit(64);
        }
    };
    let workers = std::thread::available_parallelism().map_or(1, usize::from) as u64;
    let mut done = 0;
    for (index, (name, share, property)) in PROPERTIES.iter().enumerate() {
        let each = (total * share).div_ceil(1_000 * workers);
        let start = Instant::now();
        std::thread::scope(|scope| {
            for worker in 0..workers {
                scope.spawn(move || {
                    // Seeds of their own: the tests use those below 100.
                    let mut random = Random::new(1_000 * (worker + 1) + index as u64);
                    for case in 0..each {
                        if let Err(why) = property(&mut random) {
                            println!("{name}, worker {worker}, case {case}: {why}");
                            std::process::exit(1);
                        }
                    }
                });
            }
        });
        done += each * workers;
        println!(
            "{name}: {} cases, all right, {:.1?}",
            each * workers,
            start.elapsed()
        );
    }
    println!("{done} cases in all, no difference");
}
