//! Readings out, receipts in.

mod fake_server;

use std::time::Duration;

use fake_server::FakeServer;
use num_rational::Ratio;
use ratewright_client::{
    Answer, Client, ClockDeclaration, Id, Measurement, Promise, Reading, Receipt, Receipts,
    Reference, RefusalKind, ReportOptions,
};
use ratewright_proto::v1::reading::Measurement as Wire;

fn id(text: &str) -> Id {
    Id::new(text).expect("an id")
}

fn reading(clock: &str, seconds: i64) -> Reading {
    Reading {
        clock: id(clock),
        reference: Reference::House,
        probe: None,
        sequence: None,
        measurement: Measurement::Counter {
            count: 48_000 * seconds.unsigned_abs(),
            bits: 32,
            reference_ns: seconds * 1_000_000_000,
        },
    }
}

async fn connected(server: &FakeServer) -> Client {
    let client = Client::connect(&server.address())
        .await
        .expect("it listens");
    let desk = ClockDeclaration::new(id("desk"), Ratio::from_integer(48_000));
    client.declare_clock(&desk).await.expect("a good clock");
    client
}

async fn next(receipts: &mut Receipts) -> Option<Answer> {
    let next = tokio::time::timeout(Duration::from_secs(20), receipts.next());
    next.await
        .expect("within 20 s")
        .expect("no refusal of the stream")
}

async fn rest(mut receipts: Receipts) -> Vec<Receipt> {
    let mut all = Vec::new();
    while let Some(answer) = next(&mut receipts).await {
        if let Answer::Receipt(receipt) = answer {
            all.push(receipt);
        }
    }
    all
}

#[tokio::test]
async fn refusals_name_the_reading_and_the_field() {
    let server = FakeServer::start();
    let client = connected(&server).await;
    let (reporter, receipts) = client.report(ReportOptions {
        batch_readings: 4,
        promise: Promise::Applied,
        ..ReportOptions::default()
    });
    for second in 1..=10 {
        let clock = if second == 7 { "desk-gone" } else { "desk" };
        let place = reporter.report(reading(clock, second)).expect("it is open");
        assert_eq!(place, second.unsigned_abs() - 1);
    }
    drop(reporter);
    let receipts = rest(receipts).await;
    let accepted: u64 = receipts.iter().map(|receipt| receipt.accepted).sum();
    assert_eq!(accepted, 9);
    assert!(
        receipts
            .iter()
            .all(|receipt| receipt.promise == Promise::Applied)
    );
    let refused: Vec<_> = receipts
        .iter()
        .flat_map(|receipt| &receipt.refused)
        .collect();
    assert_eq!(refused.len(), 1);
    assert_eq!(refused[0].readings, 6..7, "counted from 0 over all batches");
    assert_eq!(refused[0].value, "clocks/desk-gone");
    let last = receipts.last().expect("a receipt");
    assert_eq!(
        last.readings.end, 10,
        "what is left goes out when the reporter is dropped"
    );
}

#[tokio::test]
async fn batches_without_a_receipt_are_sent_again_as_they_were() {
    let mut server = FakeServer::start();
    let client = connected(&server).await;
    server.facility.known().silent_batches = 3;
    let (reporter, mut receipts) = client.report(ReportOptions {
        batch_readings: 8,
        ..ReportOptions::default()
    });
    for second in 1..=24 {
        reporter
            .report(reading("desk", second))
            .expect("it is open");
    }
    server
        .facility
        .until("three batches", |known| known.batches.len() == 3)
        .await;
    server.crash();
    assert!(matches!(next(&mut receipts).await, Some(Answer::Lost(_))));
    // Reported meanwhile: waits its turn behind what is sent again.
    reporter
        .report(reading("desk", 25))
        .expect("there is room in the buffer");
    server.restart();
    drop(reporter);
    let receipts = rest(receipts).await;
    let accepted: u64 = receipts.iter().map(|receipt| receipt.accepted).sum();
    assert_eq!(accepted, 25);

    let known = server.facility.known();
    assert_eq!(
        known.batches.len(),
        7,
        "three, the same three again, and the last reading"
    );
    assert_eq!(
        known.batches[..3],
        known.batches[3..6],
        "with the same numbers, to count once"
    );
    let numbers: Vec<_> = known.batches[3..]
        .iter()
        .flat_map(|b| b.readings.iter().map(|r| r.sequence))
        .collect();
    assert!(numbers.is_sorted_by(|a, b| a < b), "{numbers:?}");
}

#[tokio::test]
async fn through_an_outage_the_newest_readings_are_kept_and_the_dropped_ones_told() {
    let mut server = FakeServer::start();
    let client = connected(&server).await;
    let (mut reporter, mut receipts) = client.report(ReportOptions {
        buffer_readings: 10,
        ..ReportOptions::default()
    });
    reporter.report(reading("desk", 1)).expect("it is open");
    assert!(matches!(
        next(&mut receipts).await,
        Some(Answer::Receipt(_))
    ));
    server.crash();
    assert!(matches!(next(&mut receipts).await, Some(Answer::Lost(_))));
    for second in 2..=100 {
        let place = reporter.report(reading("desk", second));
        assert_eq!(place, Ok(second.unsigned_abs() - 1), "it never waits");
    }
    assert_eq!(reporter.dropped(), 89);
    // One that must not be dropped waits its turn.
    let waits = reporter.report_when_room(reading("desk", 101));
    let waits = tokio::time::timeout(Duration::from_millis(300), waits);
    assert!(waits.await.is_err(), "there is no room");
    assert_eq!(reporter.dropped(), 89);

    server.restart();
    let mut answers = Vec::new();
    while !matches!(answers.last(), Some(Answer::Receipt(_))) {
        answers.extend(next(&mut receipts).await);
    }
    let dropped = answers.iter().find_map(|answer| match answer {
        Answer::Dropped(readings) => Some(readings.clone()),
        _ => None,
    });
    assert_eq!(dropped, Some(1..90), "before the receipt of what follows");
    let Some(Answer::Receipt(receipt)) = answers.last() else {
        panic!("the loop ended with one");
    };
    assert_eq!((receipt.readings.clone(), receipt.accepted), (90..100, 10));
    let known = server.facility.known();
    let sent = known.batches.iter().flat_map(|batch| &batch.readings);
    let seconds = sent.map(|reading| match &reading.measurement {
        Some(Wire::Counter(counter)) => counter.reference_ns / 1_000_000_000,
        other => panic!("only counters were reported: {other:?}"),
    });
    let newest = std::iter::once(1).chain(91..=100);
    assert!(seconds.eq(newest), "{:?}", known.batches);
}

#[tokio::test]
async fn a_refused_stream_ends_with_its_reason() {
    let server = FakeServer::start();
    let client = connected(&server).await;
    let (reporter, mut receipts) = client.report(ReportOptions::default());
    let measurement = Measurement::Frequency {
        drift: 0.0,
        deviation: 0.0,
        reference_ns: 0,
    };
    reporter
        .report(Reading {
            measurement,
            ..reading("desk", 1)
        })
        .expect("it is open");
    let error = receipts
        .next()
        .await
        .expect_err("the fake will not have it");
    assert!(error.is(RefusalKind::Denied), "{error}");
    assert!(receipts.next().await.expect("it has ended").is_none());
    assert!(reporter.report(reading("desk", 2)).is_err());
}
