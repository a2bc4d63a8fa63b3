//! Delivery beside a bare service in the same run: `cargo bench -p ratewright-tests --bench delivery`.
//!
//! The bare service is the same contract on the same transport settings with handlers that do as good as
//! nothing. Both run in processes of their own and share the machine with the load; rounds of the one and
//! the other take turns, and medians of the rounds are printed, with ratios that mean something on any
//! machine.
#![allow(
    clippy::disallowed_methods,
    clippy::print_stdout,
    reason = "a benchmark reads clocks, starts processes and prints"
)]

mod bare;
mod fan_out;
mod intake;
mod served;
mod side;
mod unary;

use side::{Kind, Side};

fn main() {
    let mut arguments = std::env::args().skip(1);
    let runtime = tokio::runtime::Runtime::new().expect("the system gives threads");
    match (arguments.next().as_deref(), arguments.next()) {
        (Some("serve-bare"), Some(folder)) => runtime.block_on(bare::serve(&folder)),
        (Some("serve-ratewright"), Some(folder)) => runtime.block_on(served::serve(&folder)),
        _ => runtime.block_on(compare()),
    }
}

async fn compare() {
    let bare = Side::start(Kind::Bare).await;
    let ours = Side::start(Kind::Ratewright).await;
    let sides = [&bare, &ours];
    println!("rounds take turns; medians of the rounds; ratios are ratewright / bare\n");
    unary::compare(sides).await;
    intake::compare(sides).await;
    fan_out::compare(sides).await;
}

/// The middle of some figures.
fn median(mut figures: Vec<f64>) -> f64 {
    figures.sort_by(f64::total_cmp);
    figures[figures.len() / 2]
}

/// One line of the result: the figure of both, and their ratio beside what is wanted of it.
fn line(what: &str, unit: &str, [bare, ours]: [f64; 2], wanted: &str) {
    let ratio = ours / bare;
    println!(
        "{what:<52} bare {bare:>12.1} {unit:<11} ratewright {ours:>12.1}   {ratio:.2}  ({wanted})"
    );
}
