//! Every answer against brute force over all ratios of small bounds, and the fast paths against big
//! integers for large ones.
//!
//! The same properties run over 10^8 cases in
//! `cargo run --release -p ratewright-ratio --example brute_force`.

mod cadences;
mod certificates;
mod large;
mod oracle;
mod properties;
mod random;

use properties::PROPERTIES;
use random::Random;

const CASES: u64 = 2_000_000;

#[test]
fn every_property_holds() {
    for (index, (name, share, property)) in PROPERTIES.iter().enumerate() {
        let mut random = Random::new(index as u64);
        for case in 0..CASES * share / 1_000 {
            if let Err(why) = property(&mut random) {
                panic!("{name}, case {case}: {why}");
            }
        }
    }
}
