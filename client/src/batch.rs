//! Gathering readings into batches.

use std::ops::Range;
use std::time::{Duration, SystemTime, UNIX_EPOCH};

use ratewright_proto::v1;
use tokio::time::sleep_until;

use crate::line::Exit;

/// A batch to be sent, and again until there is a receipt for it.
#[derive(Clone, Debug)]
pub(crate) struct Batch {
    pub(crate) request: v1::ReportReadingsRequest,
    /// Which readings of the reporter it holds, counted from 0.
    pub(crate) readings: Range<u64>,
}

/// Takes readings from the line and cuts them into batches: a full one at once, a part of one when
/// its first reading has waited for `linger`.
#[derive(Debug)]
pub(crate) struct Gatherer {
    line: Exit,
    size: usize,
    linger: Duration,
    level: v1::ReceiptLevel,
    batches: u64,
    sequence: u64,
}

impl Gatherer {
    pub(crate) fn new(line: Exit, size: usize, linger: Duration, level: v1::ReceiptLevel) -> Self {
        // Numbers must grow from one run of a probe to its next, so they start at the time of day.
        let now = SystemTime::now()
            .duration_since(UNIX_EPOCH)
            .unwrap_or_default();
        let sequence = u64::try_from(now.as_nanos()).unwrap_or(1);
        Self {
            line,
            size,
            linger,
            level,
            batches: 0,
            sequence,
        }
    }

    /// The next batch, or `None` when the reporter is gone and all is cut. Cancel safe.
    pub(crate) async fn next_batch(&mut self) -> Option<Batch> {
        loop {
            let seen = self.line.look();
            if seen.waiting >= self.size || (seen.ended && seen.waiting > 0) {
                return Some(self.cut());
            }
            if seen.ended {
                return None;
            }
            let Some(since) = seen.since else {
                self.line.news().await;
                continue;
            };
            tokio::select! {
                () = self.line.news() => {}
                () = sleep_until(since + self.linger) => return Some(self.cut()),
            }
        }
    }

    fn cut(&mut self) -> Batch {
        self.batches += 1;
        let (first, readings) = self.line.take(self.size);
        let end = first + readings.len() as u64;
        let wire = readings.iter().map(|reading| {
            let mut wire = v1::Reading::from(reading);
            self.sequence += 1;
            if wire.sequence == 0 {
                wire.sequence = self.sequence;
            }
            wire
        });
        Batch {
            request: v1::ReportReadingsRequest {
                batch: self.batches,
                readings: wire.collect(),
                receipt: self.level.into(),
            },
            readings: first..end,
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::line::{Entrance, line};
    use crate::{Id, Measurement, Reading, Reference};
    use prost::Message as _;
    use tokio::time::Instant;

    fn reading(sequence: Option<u64>) -> Reading {
        Reading {
            clock: Id::new("desk").expect("an id"),
            reference: Reference::House,
            probe: None,
            sequence,
            measurement: Measurement::Counter {
                count: 48_000,
                bits: 32,
                reference_ns: 1_000_000_000,
            },
        }
    }

    fn gatherer(size: usize) -> (Entrance, Gatherer) {
        let (entrance, exit) = line(64);
        let linger = Duration::from_millis(100);
        (
            entrance,
            Gatherer::new(exit, size, linger, v1::ReceiptLevel::Durable),
        )
    }

    #[tokio::test(start_paused = true)]
    async fn a_full_batch_goes_at_once_and_a_part_after_the_linger() {
        let (entrance, mut gatherer) = gatherer(8);
        let start = Instant::now();
        for _ in 0..11 {
            entrance.push(reading(None)).expect("it is open");
        }
        let full = gatherer.next_batch().await.expect("a batch");
        assert_eq!((full.readings, start.elapsed()), (0..8, Duration::ZERO));
        assert!(
            full.request.encoded_len() >= 256,
            "a frame of {}",
            full.request.encoded_len()
        );
        let part = gatherer.next_batch().await.expect("a batch");
        assert_eq!(part.readings, 8..11);
        assert!(
            start.elapsed() >= Duration::from_millis(100),
            "{:?}",
            start.elapsed()
        );
        drop(entrance);
        assert!(gatherer.next_batch().await.is_none());
    }

    #[tokio::test(start_paused = true)]
    async fn a_cancelled_wait_loses_no_reading() {
        let (entrance, mut gatherer) = gatherer(8);
        for expected in 1..=3 {
            entrance.push(reading(None)).expect("it is open");
            let wait = tokio::time::timeout(Duration::from_millis(1), gatherer.next_batch());
            assert!(wait.await.is_err(), "not due yet");
            assert_eq!(gatherer.line.look().waiting, expected);
        }
        assert_eq!(gatherer.next_batch().await.expect("a batch").readings, 0..3);
    }

    #[tokio::test(start_paused = true)]
    async fn unnumbered_readings_get_growing_numbers_and_numbered_ones_keep_theirs() {
        let (entrance, mut gatherer) = gatherer(3);
        for sequence in [None, Some(7), None] {
            entrance.push(reading(sequence)).expect("it is open");
        }
        let batch = gatherer.next_batch().await.expect("a batch");
        let numbers: Vec<_> = batch.request.readings.iter().map(|r| r.sequence).collect();
        assert!(
            numbers[0] > 1_000_000_000_000_000_000,
            "starts at the time of day: {numbers:?}"
        );
        assert_eq!((numbers[1], numbers[2]), (7, numbers[0] + 2));
    }

    #[tokio::test(start_paused = true)]
    async fn in_a_full_line_the_oldest_gives_way_or_the_newest_waits() {
        let (entrance, mut gatherer) = gatherer(60);
        for place in 0..70 {
            assert_eq!(entrance.push(reading(Some(place + 1))), Ok(place));
        }
        assert_eq!(entrance.dropped(), 6);
        let waits = async {
            let place = entrance.push_when_room(reading(Some(71))).await;
            assert_eq!(place, Ok(70));
            assert_eq!(entrance.dropped(), 6);
        };
        let cuts = async {
            tokio::time::sleep(Duration::from_secs(1)).await;
            let batch = gatherer.next_batch().await.expect("a batch");
            assert_eq!(batch.readings, 6..66);
            assert_eq!(batch.request.readings[0].sequence, 7);
        };
        tokio::join!(waits, cuts);
        let batch = gatherer.next_batch().await.expect("a batch");
        assert_eq!(batch.readings, 66..71);
        drop(gatherer);
        assert!(entrance.push(reading(None)).is_err());
        assert!(entrance.push_when_room(reading(None)).await.is_err());
    }
}
