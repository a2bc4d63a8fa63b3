//! Gathering readings into batches.

use std::ops::Range;
use std::time::{Duration, SystemTime, UNIX_EPOCH};

use ratewright_proto::v1;
use tokio::sync::mpsc;
use tokio::sync::mpsc::error::TryRecvError;
use tokio::time::{Instant, sleep_until};

use crate::Reading;

/// A batch to be sent, and again until there is a receipt for it.
#[derive(Clone, Debug)]
pub(crate) struct Batch {
    pub(crate) request: v1::ReportReadingsRequest,
    /// Which readings of the reporter it holds, counted from 0.
    pub(crate) readings: Range<u64>,
}

/// Takes readings from the reporter and cuts them into batches: a full one at once, a part of one
/// when its first reading has waited for `linger`.
#[derive(Debug)]
pub(crate) struct Gatherer {
    readings: mpsc::Receiver<Reading>,
    size: usize,
    linger: Duration,
    level: v1::ReceiptLevel,
    gathered: Vec<v1::Reading>,
    due: Option<Instant>,
    cut: u64,
    batches: u64,
    sequence: u64,
}

impl Gatherer {
    pub(crate) fn new(
        readings: mpsc::Receiver<Reading>,
        size: usize,
        linger: Duration,
        level: v1::ReceiptLevel,
    ) -> Self {
        // Numbers must grow from one run of a probe to its next, so they start at the time of day.
        let now = SystemTime::now()
            .duration_since(UNIX_EPOCH)
            .unwrap_or_default();
        let sequence = u64::try_from(now.as_nanos()).unwrap_or(1);
        Self {
            readings,
            size,
            linger,
            level,
            gathered: Vec::new(),
            due: None,
            cut: 0,
            batches: 0,
            sequence,
        }
    }

    /// The next batch, or `None` when the reporter is gone and all is cut. Cancel safe.
    pub(crate) async fn next_batch(&mut self) -> Option<Batch> {
        loop {
            let ended = self.take_what_is_there();
            if self.gathered.len() >= self.size || (ended && !self.gathered.is_empty()) {
                return Some(self.cut());
            }
            if ended {
                return None;
            }
            let due = self.due;
            tokio::select! {
                reading = self.readings.recv() => {
                    if let Some(reading) = reading {
                        self.gather(&reading);
                    }
                }
                () = sleep_until(due.unwrap_or_else(Instant::now)), if due.is_some() => {
                    return Some(self.cut());
                }
            }
        }
    }

    /// Fills the batch without waiting; true if the reporter is gone and nothing is left.
    fn take_what_is_there(&mut self) -> bool {
        while self.gathered.len() < self.size {
            match self.readings.try_recv() {
                Ok(reading) => self.gather(&reading),
                Err(TryRecvError::Empty) => return false,
                Err(TryRecvError::Disconnected) => return true,
            }
        }
        false
    }

    fn gather(&mut self, reading: &Reading) {
        let mut wire = v1::Reading::from(reading);
        self.sequence += 1;
        if wire.sequence == 0 {
            wire.sequence = self.sequence;
        }
        self.gathered.push(wire);
        self.due.get_or_insert_with(|| Instant::now() + self.linger);
    }

    fn cut(&mut self) -> Batch {
        self.due = None;
        self.batches += 1;
        let readings = std::mem::take(&mut self.gathered);
        let first = self.cut;
        self.cut += readings.len() as u64;
        let receipt = self.level.into();
        Batch {
            request: v1::ReportReadingsRequest {
                batch: self.batches,
                readings,
                receipt,
            },
            readings: first..self.cut,
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::{Id, Measurement, Reference};
    use prost::Message as _;

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

    fn gatherer(size: usize) -> (mpsc::Sender<Reading>, Gatherer) {
        let (sender, receiver) = mpsc::channel(64);
        let linger = Duration::from_millis(100);
        (
            sender,
            Gatherer::new(receiver, size, linger, v1::ReceiptLevel::Durable),
        )
    }

    #[tokio::test(start_paused = true)]
    async fn a_full_batch_goes_at_once_and_a_part_after_the_linger() {
        let (sender, mut gatherer) = gatherer(8);
        let start = Instant::now();
        for _ in 0..11 {
            sender.send(reading(None)).await.expect("room");
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
        drop(sender);
        assert!(gatherer.next_batch().await.is_none());
    }

    #[tokio::test(start_paused = true)]
    async fn a_cancelled_wait_loses_no_reading() {
        let (sender, mut gatherer) = gatherer(8);
        for expected in 1..=3 {
            sender.send(reading(None)).await.expect("room");
            let wait = tokio::time::timeout(Duration::from_millis(1), gatherer.next_batch());
            assert!(wait.await.is_err(), "not due yet");
            assert_eq!(gatherer.gathered.len(), expected);
        }
        assert_eq!(gatherer.next_batch().await.expect("a batch").readings, 0..3);
    }

    #[tokio::test(start_paused = true)]
    async fn unnumbered_readings_get_growing_numbers_and_numbered_ones_keep_theirs() {
        let (sender, mut gatherer) = gatherer(3);
        for sequence in [None, Some(7), None] {
            sender.send(reading(sequence)).await.expect("room");
        }
        let batch = gatherer.next_batch().await.expect("a batch");
        let numbers: Vec<_> = batch.request.readings.iter().map(|r| r.sequence).collect();
        assert!(
            numbers[0] > 1_000_000_000_000_000_000,
            "starts at the time of day: {numbers:?}"
        );
        assert_eq!((numbers[1], numbers[2]), (7, numbers[0] + 2));
    }
}
