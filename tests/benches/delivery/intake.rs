//! Readings in batches of 64, on four streams of four connections, as fast as receipts let them.
//!
//! Where the time goes: a batch that asks for a receipt which does not exist is decoded and refused at the
//! door, which is the transport alone. Repeated readings (by their number) are taken in and written without
//! being estimated with. The threads of both processes tell how long they ran meanwhile, which neither
//! waiting nor the load's share of the machine moves.

use std::time::{Duration, Instant};

use ratewright_proto::v1::{self, reading_service_client::ReadingServiceClient};
use tokio::sync::mpsc;
use tokio_stream::wrappers::ReceiverStream;
use tonic::transport::Channel;

use crate::{
    bare::JOURNAL_BYTES,
    line, median,
    served::CLOCKS,
    side::{Ran, Side},
};

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

/// What came of the rounds of a load, for both sides.
struct Measured {
    /// Readings a second.
    rates: [f64; 2],
    /// Time that the threads ran, us a reading.
    ran: [Ran; 2],
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
        transport.rates,
        "wanted 0.8 or more",
    );
    let applied = repeated(v1::ReceiptLevel::Applied.into()).await;
    line(
        "readings, receipts applied, nothing to estimate",
        "readings/s",
        applied.rates,
        "stated; ratewright writes them too",
    );
    let durable = repeated(v1::ReceiptLevel::Durable.into()).await;
    line(
        "readings, receipts durable, nothing to estimate",
        "readings/s",
        durable.rates,
        "wanted 0.7 or more; bare writes a row a batch",
    );
    let in_rows = repeated(v1::ReceiptLevel::Unspecified.into()).await;
    line(
        "the same",
        "readings/s",
        in_rows.rates,
        "bare writes a row a reading",
    );
    let fresh = Load {
        receipt: v1::ReceiptLevel::Durable.into(),
        fresh: true,
    };
    let whole = both(sides, fresh, &mut next_s).await;
    line(
        "readings, receipts durable, estimated with",
        "readings/s",
        whole.rates,
        "stated",
    );
    println!(
        "  the journal takes {:.1} bytes a reading; bare writes {JOURNAL_BYTES}",
        sides[1].journal_bytes()
    );
    tell_where([&transport, &durable, &whole]);
}

/// Where the time of a reading goes, of the server's threads alone.
fn tell_where([transport, durable, whole]: [&Measured; 3]) {
    println!(
        "  time that the server's threads run, us a reading      bare: serving  writing  ratewright: serving  writing"
    );
    let rows = [
        ("transport alone", transport),
        ("receipts durable, nothing to estimate", durable),
        ("receipts durable, estimated with", whole),
    ];
    for (
        name,
        Measured {
            ran: [bare, ours], ..
        },
    ) in rows
    {
        println!(
            "    {name:<52}{:>13.2}{:>9.2}{:>21.2}{:>9.2}",
            bare.serving, bare.writing, ours.serving, ours.writing
        );
    }
    let [alone, [bare, plain], [_, full]] = [transport.ran, durable.ran, whole.ran];
    println!(
        "  so of {:.2} us: transport {:.2}; checks, hand-over and receipts {:.2}; the bytes to the store, as bare \
         {:.2}; the engine's door and the journal's form {:.2}; estimate and policy {:.2}\n",
        full.serving + full.writing,
        alone[1].serving,
        plain.serving - alone[1].serving,
        bare.writing,
        plain.writing - bare.writing,
        full.serving + full.writing - plain.serving - plain.writing,
    );
}

async fn both(sides: [&Side; 2], load: Load, next_s: &mut i64) -> Measured {
    let mut rates = [Vec::new(), Vec::new()];
    let mut ran = [Ran::default(); 2];
    let mut readings = [0.0; 2];
    for _ in 0..ROUNDS {
        for (side, place) in sides.iter().zip(0..) {
            let before = side.ran();
            let rate = round(side, load, next_s).await;
            let after = side.ran();
            ran[place].writing += after.writing - before.writing;
            ran[place].serving += after.serving - before.serving;
            readings[place] += rate * ROUND.as_secs_f64();
            rates[place].push(rate);
        }
    }
    let a_reading = |place: usize| Ran {
        writing: ran[place].writing * 1e6 / readings[place],
        serving: ran[place].serving * 1e6 / readings[place],
    };
    Measured {
        rates: rates.map(median),
        ran: [a_reading(0), a_reading(1)],
    }
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
