//! Reports this machine's monotonic clock as if it were a sound device's counter of samples, against
//! house time: `cargo run -p ratewright-client --example report -- http://127.0.0.1:7420 my-clock`, once
//! `my-clock` of 48 kHz is declared.
#![allow(clippy::print_stdout, reason = "an example prints")]
#![allow(
    clippy::disallowed_methods,
    reason = "an example reads its arguments and the clock"
)]

use std::time::{Duration, Instant};

use ratewright_client::{Answer, CallError, Client, Id, Measurement, Reading, Reference};

const RATE_HZ: u128 = 48_000;

#[tokio::main]
async fn main() -> Result<(), Box<dyn std::error::Error>> {
    let mut arguments = std::env::args().skip(1);
    let address = arguments.next().ok_or("which daemon?")?;
    let clock = Id::new(&arguments.next().ok_or("which clock?")?)?;
    let client = Client::connect(&address).await?;
    let (reporter, mut receipts) = client.report(Default::default());

    let start = Instant::now();
    for _ in 0..60 {
        let ahead_ns = ahead_of_house_ns(&client, start).await?;
        // Latch the counter first, then read the reference at once.
        let count = start.elapsed().as_nanos() * RATE_HZ / 1_000_000_000;
        let house_ns = local_ns(start) - ahead_ns;
        reporter.report(Reading {
            clock: clock.clone(),
            reference: Reference::House,
            probe: None,
            sequence: None,
            measurement: Measurement::Counter {
                count: u64::try_from(count)?,
                bits: 64,
                reference_ns: house_ns,
            },
        })?;
        tokio::time::sleep(Duration::from_secs(1)).await;
    }
    drop(reporter);
    while let Some(answer) = receipts.next().await? {
        match answer {
            Answer::Receipt(receipt) => println!(
                "{} taken in, {} refused",
                receipt.accepted,
                receipt.refused.len()
            ),
            Answer::Dropped(readings) => println!("{} dropped", readings.end - readings.start),
            Answer::Lost(loss) => println!("{loss}"),
            _ => {}
        }
    }
    Ok(())
}

/// This machine's own time: ns since the start.
fn local_ns(start: Instant) -> i64 {
    i64::try_from(start.elapsed().as_nanos()).unwrap_or(i64::MAX)
}

/// How far that is ahead of house time, ns, by the quickest of a few exchanges.
async fn ahead_of_house_ns(client: &Client, start: Instant) -> Result<i64, CallError> {
    let mut quickest = client.exchange_time(|| local_ns(start)).await?;
    for _ in 1..4 {
        let exchange = client.exchange_time(|| local_ns(start)).await?;
        if exchange.round_trip_ns() < quickest.round_trip_ns() {
            quickest = exchange;
        }
    }
    Ok(quickest.ahead_ns())
}
