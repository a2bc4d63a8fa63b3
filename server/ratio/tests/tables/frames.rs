//! Samples a video frame.

use ratewright_ratio::{FrameCadence, FrameOrder, parse_rate};
use serde_json::Value;

use crate::rows;

fn list(record: &Value, field: &str) -> Option<Vec<u64>> {
    record[field]
        .as_array()
        .map(|list| list.iter().map(|x| x.as_u64().expect("whole")).collect())
}

fn pattern(cadence: &FrameCadence) -> Vec<u64> {
    (0..cadence.period_frames())
        .map(|index| cadence.samples_in(index))
        .collect()
}

#[test]
fn samples_per_frame() {
    let mut sequences = 0;
    for record in rows::json(include_str!("../data/cadences.json"), 289) {
        let rate = |field: &str| parse_rate(record[field].as_str().expect("text")).expect("a rate");
        let cadence = |order| {
            FrameCadence::new(rate("audio_hz"), rate("fps"), order).expect("positive rates")
        };
        let standard = cadence(FrameOrder::Smpte272m);
        assert_eq!(
            Some(standard.period_samples()),
            record["samples"].as_u64(),
            "{record}"
        );
        assert_eq!(
            Some(standard.period_frames()),
            record["frames"].as_u64(),
            "{record}"
        );
        if let Some(sequence) = list(&record, "sequence") {
            assert_eq!(pattern(&standard), sequence, "{record}");
            sequences += 1;
        }
        let orders = [
            ("cadence_nearest", FrameOrder::Nearest),
            ("cadence_floor", FrameOrder::Floor),
            ("cadence_ceil", FrameOrder::Ceiling),
        ];
        for (field, order) in orders {
            if let Some(wanted) = list(&record, field) {
                assert_eq!(pattern(&cadence(order)), wanted, "{record}");
            }
            let sum: u64 = pattern(&cadence(order)).iter().sum();
            assert_eq!(Some(sum), record["samples"].as_u64(), "{record}");
        }
        if let Some(least_and_most) = list(&record, "cadence_min_max") {
            let nearest = pattern(&cadence(FrameOrder::Nearest));
            let shown =
                [nearest.iter().min(), nearest.iter().max()].map(|x| *x.expect("not empty"));
            assert_eq!(shown.as_slice(), least_and_most, "{record}");
        }
    }
    assert_eq!(sequences, 3);
}
