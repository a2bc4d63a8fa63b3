//! Readings in, receipts out.

use ratewright_proto::v1;

use crate::facility::{Facility, drift};

#[tokio::test]
async fn readings_change_the_estimate_before_the_receipt_comes() {
    let mut facility = Facility::start().await;
    facility.clients.declare_clock("desk").await.unwrap();
    let mut report = facility.clients.report().await;
    let readings = (1..=200)
        .map(|second| drift("desk", 5e-6, second))
        .collect();
    let receipt = report.batch(readings).await;
    assert_eq!(
        (receipt.accepted, receipt.refusals.len()),
        (200, 0),
        "{:?}",
        receipt.refusals.first()
    );
    assert_eq!(receipt.level(), v1::ReceiptLevel::Durable);
    assert!(
        receipt.house_ns > 1_700_000_000_000_000_000,
        "house time: {}",
        receipt.house_ns
    );

    let get = v1::GetClockRequest {
        name: "clocks/desk".into(),
    };
    let clock = facility
        .clients
        .clocks
        .get_clock(get)
        .await
        .unwrap()
        .into_inner();
    let estimate = clock.estimate.unwrap();
    assert!((estimate.drift - 5e-6).abs() < 1e-7, "{estimate:?}");
    assert!(estimate.readings_used > 0);
    assert_eq!(estimate.reference, "house");
}

#[tokio::test]
async fn bad_readings_are_refused_one_by_one_and_the_stream_goes_on() {
    let mut facility = Facility::start().await;
    facility.clients.declare_clock("desk").await.unwrap();
    let mut report = facility.clients.report().await;
    assert_eq!(
        report.batch(vec![drift("desk", 1e-6, 10)]).await.accepted,
        1
    );

    let no_measurement = v1::Reading {
        measurement: None,
        ..drift("desk", 0.0, 11)
    };
    let to_itself = v1::Reading {
        reference: "clocks/desk".into(),
        ..drift("desk", 0.0, 11)
    };
    let receipt = report
        .batch(vec![
            drift("desk", f64::NAN, 11),
            drift("moon", 1e-6, 12),
            drift("desk", 1e-6, 13),
            drift("desk", 1e-6, 9),
            no_measurement,
            to_itself,
            drift("desk", 1e-6, 14),
        ])
        .await;
    assert_eq!(receipt.accepted, 2, "{:?}", receipt.refusals);
    let refusals: Vec<(i32, &str, &str)> = receipt
        .refusals
        .iter()
        .map(|refusal| {
            (
                refusal.index,
                refusal.field.as_str(),
                refusal.value.as_str(),
            )
        })
        .collect();
    assert_eq!(
        refusals,
        [
            (0, "readings[0].frequency.drift", "NaN"),
            (1, "readings[1].clock", "clocks/moon"),
            (3, "readings[3].frequency.reference_ns", "9000000000"),
            (4, "readings[4].measurement", "absent"),
            (5, "readings[5].reference", "clocks/desk"),
        ]
    );
    assert!(
        receipt
            .refusals
            .iter()
            .all(|refusal| !refusal.accepted.is_empty())
    );
    assert_eq!(
        report.batch(vec![drift("desk", 1e-6, 15)]).await.accepted,
        1
    );
}

#[tokio::test]
async fn a_batch_too_long_or_empty_is_refused_whole() {
    let mut facility = Facility::start().await;
    facility.clients.declare_clock("desk").await.unwrap();
    let mut report = facility.clients.report().await;
    for count in [4097, 0] {
        let receipt = report.batch(vec![drift("desk", 1e-6, 1); count]).await;
        assert_eq!(receipt.accepted, 0);
        let [refusal] = receipt.refusals.as_slice() else {
            panic!("one refusal for the batch")
        };
        assert_eq!((refusal.index, refusal.field.as_str()), (-1, "readings"));
        assert_eq!(refusal.value, count.to_string());
    }
    assert_eq!(report.batch(vec![drift("desk", 1e-6, 1)]).await.accepted, 1);
}

#[tokio::test]
async fn receipts_come_in_order_and_say_what_they_promise() {
    let mut facility = Facility::start().await;
    facility.clients.declare_clock("desk").await.unwrap();
    let mut report = facility.clients.report().await;
    let levels = [v1::ReceiptLevel::Applied, v1::ReceiptLevel::Durable];
    for batch in 0..40 {
        let readings = vec![drift("desk", 1e-6, batch as i64 + 1)];
        let receipt = levels[batch as usize % 2].into();
        let request = v1::ReportReadingsRequest {
            batch,
            readings,
            receipt,
        };
        report.batches.send(request).await.unwrap();
    }
    for batch in 0..40 {
        let receipt = report.receipts.message().await.unwrap().unwrap();
        assert_eq!((receipt.batch, receipt.accepted), (batch, 1));
        assert_eq!(receipt.level(), levels[batch as usize % 2]);
    }
    let request = v1::ReportReadingsRequest {
        receipt: 9,
        ..Default::default()
    };
    let receipt = report.send(request).await;
    assert_eq!(receipt.refusals[0].field, "receipt");
}

#[tokio::test]
async fn an_exchange_tells_house_time() {
    let mut facility = Facility::start().await;
    let before = facility.daemon.house().now();
    let request = v1::ExchangeTimeRequest { t1_ns: -77 };
    let answer = facility
        .clients
        .readings
        .exchange_time(request)
        .await
        .unwrap()
        .into_inner();
    let after = facility.daemon.house().now();
    assert_eq!(answer.t1_ns, -77);
    assert!(before <= answer.t2_ns && answer.t2_ns <= answer.t3_ns && answer.t3_ns <= after);
}

/// A stream of 48 kHz that runs 20 ppm fast, seen by its timestamps of 32 bits, which wrap.
#[tokio::test]
async fn sender_reports_tell_a_drift() {
    let mut facility = Facility::start().await;
    facility.clients.declare_clock("desk").await.unwrap();
    let mut report = facility.clients.report().await;
    let first = u64::from(u32::MAX) - 1_000_000;
    let sent = |second: u64| {
        let ticks = (second as f64 * 48_000.0 * (1.0 + 20e-6)).round() as u64;
        let sender_report = v1::SenderReport {
            media_timestamp: (first + ticks) & u64::from(u32::MAX),
            bits: 0,
            reference_ns: second as i64 * 1_000_000_000,
        };
        v1::Reading {
            measurement: Some(v1::reading::Measurement::SenderReport(sender_report)),
            ..drift("desk", 0.0, 0)
        }
    };
    let receipt = report.batch((1..=200).map(sent).collect()).await;
    assert_eq!(receipt.accepted, 200, "{:?}", receipt.refusals.first());
    let get = v1::GetClockRequest {
        name: "clocks/desk".into(),
    };
    let clock = facility.clients.clocks.get_clock(get).await.unwrap();
    let estimate = clock.into_inner().estimate.unwrap();
    assert!((estimate.drift - 20e-6).abs() < 1e-6, "{estimate:?}");

    let refused = report.batch(vec![sent(200)]).await;
    let field = "readings[0].sender_report.reference_ns";
    assert_eq!(refused.refusals[0].field, field);
    let wide = v1::SenderReport {
        media_timestamp: 1 << 32,
        ..Default::default()
    };
    let wide = v1::Reading {
        measurement: Some(v1::reading::Measurement::SenderReport(wide)),
        ..sent(201)
    };
    let refused = report.batch(vec![wide]).await;
    let field = "readings[0].sender_report.media_timestamp";
    assert_eq!(refused.refusals[0].field, field);
}
