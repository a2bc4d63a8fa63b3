//! Reports this machine's monotonic clock as if it were a sound device's counter of samples:
//! `cargo run -p ratewright-client --example report -- http://127.0.0.1:7420 my-clock`.
#![allow(clippy::print_stdout, reason = "an example prints")]
#![allow(
    clippy::disallowed_methods,
    reason = "an example reads its arguments and the clock"
)]

use std::time::{Duration, Instant, SystemTime, UNIX_EPOCH};

use ratewright_client::{Answer, Client, Id, Measurement, Reading, Reference};

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
        // Latch the counter first, then read the reference at once.
        let count = start.elapsed().as_nanos() * RATE_HZ / 1_000_000_000;
        let now = SystemTime::now().duration_since(UNIX_EPOCH)?;
        reporter.report(Reading {
            clock: clock.clone(),
            reference: Reference::House,
            probe: None,
            sequence: None,
            measurement: Measurement::Counter {
                count: u64::try_from(count)?,
                bits: 64,
                reference_ns: i64::try_from(now.as_nanos())?,
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
