//! Followers in a storm: `cargo run --release -p ratewright-tests --example chaos -- FOLLOWERS CHANGES`.
//!
//! The daemon is a process of its own; followers reach it through a network that delays, cuts,
//! swallows, falls silent and lies. Afterwards every follower must be at the newest setting, and none
//! may ever have been handed an older one after a newer one, or one whose certificate fails.
#![allow(clippy::print_stdout, reason = "it prints what came of it")]

use std::error::Error;

use clap::Parser;
use ratewright_tests::chaos::proxy::FATES;
use ratewright_tests::chaos::storm::{Memory, Plan, rage};

/// How great a storm.
#[derive(Debug, Parser)]
struct Arguments {
    /// Followers.
    followers: usize,
    /// Changes of settings, over all crossings.
    changes: u64,
    /// Crossings that the followers share.
    #[arg(long, default_value_t = 100)]
    crossings: usize,
    /// Restarts of the daemon in the first half, by turns killed and drained.
    #[arg(long, default_value_t = 5)]
    restarts: u64,
    /// Seed of the network.
    #[arg(long, default_value_t = 1)]
    seed: u64,
}

#[tokio::main]
async fn main() -> Result<(), Box<dyn Error>> {
    let arguments = Arguments::parse();
    let plan = Plan {
        followers: arguments.followers,
        crossings: arguments.crossings,
        changes: arguments.changes,
        restarts: arguments.restarts,
        seed: arguments.seed,
    };
    let outcome = rage(&plan).await?;
    println!(
        "{} changes acknowledged in {:.0} s, {} failed as the daemon went; newest numbers sum to {}",
        outcome.acknowledged, outcome.changing_s, outcome.failed, outcome.numbers
    );
    for (fate, count) in FATES.iter().zip(outcome.fates) {
        println!("connections {fate:?}: {count}");
    }
    println!(
        "{} followers: {} settings handed on, {} forged ones kept from them, {} losses of contact",
        plan.followers, outcome.handed, outcome.forged, outcome.losses
    );
    println!(
        "{} at the newest setting {:.1} s after the calm, {} behind",
        plan.followers - outcome.behind.len(),
        outcome.settling_s,
        outcome.behind.len()
    );
    for memory in &outcome.memory {
        println!(
            "daemon's memory, life {}, after {} changes: {:.1} MiB",
            memory.life,
            memory.changes,
            memory.resident_kib as f64 / 1_024.0
        );
    }
    if let Some([tenth, half, all]) = outcome.last_life() {
        let mib = |memory: Memory| memory.resident_kib as f64 / 1_024.0;
        println!(
            "daemon's memory in its last life: {:.1} MiB after a tenth of it, {:.1} after half, {:.1} at the end",
            mib(tenth),
            mib(half),
            mib(all)
        );
    }
    for wrong in outcome.behind.iter().chain(&outcome.wrongs) {
        println!("wrong: {wrong}");
    }
    match outcome.behind.len() + outcome.wrongs.len() {
        0 => Ok(()),
        wrongs => Err(format!("{wrongs} things went wrong").into()),
    }
}
