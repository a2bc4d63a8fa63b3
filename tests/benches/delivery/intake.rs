//! Readings in batches of 64, on four streams of four connections, as fast as receipts let them.
//!
//! Where the time goes: a batch that asks for a receipt which does not exist is decoded and refused at the
//! door, which is the transport alone. Repeated readings (by their number) are taken in without being
//! estimated with, so that applied receipts of them add the way to the engine, and durable ones the store.

use std::time::{Duration, Instant};

use ratewright_proto::v1::{self, reading_service_client::ReadingServiceClient};
use tokio::sync::mpsc;
use tokio_stream::wrappers::ReceiverStream;
use tonic::transport::Channel;

use crate::{line, median, served::CLOCKS, side::Side};

const BATCH: u64 = 64;
const ROUND: Duration = Duration::from_secs(2);
const ROUNDS: usize = 7;
/// Batches that a stream has on their way.
const AHEAD: usize = 16;
const NS_PER_S: i64 = 1_000_000_000;
/// Readings are of times long past, because they come faster than time goes by: a day of them takes less
/// than a second. Each round has its own stretch, and all of them end before now: readings ahead of house time are
/// refused.
const FROM_S: i64 = 1_700_000_000;
const STRETCH_S: i64 = 1_000_000;

/// No level of a receipt.
const NO_RECEIPT: i32 = 99;

/// What a round is about.
#[derive(Clone, Copy)]
struct Load {
    receipt: i32,
    /// The same readings over and over, or new ones.
    fresh: bool,
}

pub(crate) async fn compare(sides: [&Side; 2]) {
    let mut next_s = FROM_S;
    let mut repeated = async |receipt| {
        let load = Load {
            receipt,
            fresh: false,
        };
        both(sides, load, &mut next_s).await
    };
    let transport = repeated(NO_RECEIPT).await;
    line(
        "readings, transport alone",
        "readings/s",
        transport,
        "wanted 0.8 or more",
    );
    let applied = repeated(v1::ReceiptLevel::Applied.into()).await;
    line(
        "readings, receipts applied, nothing to estimate",
        "readings/s",
        applied,
        "stated",
    );
    let durable = repeated(v1::ReceiptLevel::Durable.into()).await;
    line(
        "readings, receipts durable, nothing to estimate",
        "readings/s",
        durable,
        "wanted 0.7 or more",
    );
    let fresh = Load {
        receipt: v1::ReceiptLevel::Durable.into(),
        fresh: true,
    };
    let whole = both(sides, fresh, &mut next_s).await;
    line(
        "readings, receipts durable, estimated with",
        "readings/s",
        whole,
        "stated",
    );
    let microseconds = |rate: f64| 1e6 / rate;
    println!(
        "  of {:.2} us a reading: transport {:.2}, checks and the engine's door {:.2}, store {:.2}, estimate and \
         policy {:.2}\n",
        microseconds(whole[1]),
        microseconds(transport[1]),
        microseconds(applied[1]) - microseconds(transport[1]),
        microseconds(durable[1]) - microseconds(applied[1]),
        microseconds(whole[1]) - microseconds(durable[1]),
    );
}

async fn both(sides: [&Side; 2], load: Load, next_s: &mut i64) -> [f64; 2] {
    let mut rates = [Vec::new(), Vec::new()];
    for _ in 0..ROUNDS {
        for (side, rates) in sides.iter().zip(&mut rates) {
            rates.push(round(side, load, next_s).await);
        }
    }
    rates.map(median)
}

async fn round(side: &Side, load: Load, next_s: &mut i64) -> f64 {
    let until = Instant::now() + ROUND;
    let mut streams = Vec::new();
    for clock in 0..CLOCKS {
        let readings = side.readings().await;
        streams.push(tokio::spawn(stream(readings, load, clock, *next_s, until)));
    }
    *next_s += STRETCH_S;
    let mut answered = 0_u64;
    for stream in streams {
        answered += stream.await.expect("a load does not panic");
    }
    answered as f64 / ROUND.as_secs_f64()
}

/// Readings answered until the time is up.
async fn stream(
    mut readings: ReadingServiceClient<Channel>,
    load: Load,
    clock: usize,
    from_s: i64,
    until: Instant,
) -> u64 {
    let (sender, batches) = mpsc::channel(AHEAD);
    let receipts = readings.report_readings(ReceiverStream::new(batches)).await;
    let mut receipts = receipts.expect("it takes readings").into_inner();
    tokio::spawn(async move {
        let mut second = from_s;
        for batch in 0.. {
            let readings = (0..BATCH).map(|_| {
                if load.fresh {
                    second += 1;
                }
                reading(clock, second, load.fresh)
            });
            let sent = v1::ReportReadingsRequest {
                batch,
                readings: readings.collect(),
                receipt: load.receipt,
            };
            if Instant::now() > until || sender.send(sent).await.is_err() {
                return;
            }
        }
    });
    let mut answered = 0;
    while let Some(receipt) = receipts.message().await.expect("receipts") {
        let refused = receipt.refusals.first();
        assert!(
            refused.is_none() || load.receipt == NO_RECEIPT,
            "{refused:?}"
        );
        answered += BATCH;
    }
    answered
}

/// A counter of 48 kHz, 12 ppm fast, that is read once a second.
fn reading(clock: usize, second: i64, fresh: bool) -> v1::Reading {
    v1::Reading {
        clock: format!("clocks/clock-{clock}"),
        reference: "house".into(),
        probe: String::new(),
        sequence: if fresh { second as u64 + 1 } else { 1 },
        measurement: Some(v1::reading::Measurement::Counter(v1::CounterReading {
            count: (second as f64 * 48_000.0 * (1.0 + 12e-6)) as u64,
            bits: 64,
            reference_ns: second * NS_PER_S,
        })),
    }
}
