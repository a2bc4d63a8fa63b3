//! Readings out, receipts in.

use std::collections::VecDeque;
use std::ops::Range;
use std::time::Duration;

use ratewright_proto::v1;
use thiserror::Error;
use tokio::sync::mpsc;
use tokio::time::sleep;
use tokio_stream::wrappers::ReceiverStream;
use tonic::Status;

use crate::backoff::Backoff;
use crate::batch::{Batch, Gatherer};
use crate::line::{Entrance, line};
use crate::{CallError, Client, Loss, Reading};

/// Largest batch the contract allows, in readings.
const LARGEST_BATCH: usize = 4096;

/// Batches sent and not yet receipted; other readings wait in the reporter's buffer.
const UNRECEIPTED: usize = 32;

/// Answers that wait to be taken.
const ANSWERS: usize = 256;

/// What a receipt must promise.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub enum Promise {
    /// The readings have changed the estimates; a crash may lose them.
    Applied,
    /// The readings are on disk and survive a crash of the machine.
    #[default]
    Durable,
}

/// How to report.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct ReportOptions {
    /// What receipts must promise.
    pub promise: Promise,
    /// Readings in a batch, 1 to 4096; values outside are taken as the nearest of these. Short
    /// messages cost a connection dearly, so a live probe should not ask for 1.
    pub batch_readings: usize,
    /// Longest time a reading waits for others to share its batch.
    pub linger: Duration,
    /// Readings that may wait, beyond those in unreceipted batches: what bridges an outage. When there are
    /// more, the oldest are dropped by [`Reporter::report`], while [`Reporter::report_when_room`] waits.
    pub buffer_readings: usize,
}

impl Default for ReportOptions {
    /// Durable receipts, batches of 256, at most 100 ms late, 16,384 readings buffered.
    fn default() -> Self {
        Self {
            promise: Promise::Durable,
            batch_readings: 256,
            linger: Duration::from_millis(100),
            buffer_readings: 16_384,
        }
    }
}

/// Where readings go in. Drop it when there are no more: what is left is sent, and
/// [`Receipts::next`] ends after the last receipt.
///
/// # Examples
/// ```no_run
/// # async fn example(client: ratewright_client::Client) -> Result<(), Box<dyn std::error::Error>> {
/// use ratewright_client::{Answer, Id, Measurement, Reading, Reference};
/// let (reporter, mut receipts) = client.report(Default::default());
/// let (count, bits, reference_ns) = (48_000, 32, 1_000_000_000);
/// reporter.report(Reading {
///     clock: Id::new("desk")?,
///     reference: Reference::House,
///     probe: None,
///     sequence: None,
///     measurement: Measurement::Counter { count, bits, reference_ns },
/// })?;
/// drop(reporter);
/// while let Some(answer) = receipts.next().await? {
///     if let Answer::Receipt(receipt) = answer {
///         println!("{} taken in, {} refused", receipt.accepted, receipt.refused.len());
///     }
/// }
/// # Ok(())
/// # }
/// ```
#[derive(Debug)]
pub struct Reporter {
    line: Entrance,
}

/// The report stream has ended; [`Receipts::next`] says why.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Error)]
#[error("the report stream has ended; its receipts say why")]
pub struct Closed;

impl Reporter {
    /// Hands over a reading that was just taken, and returns its place, counted from 0, by which receipts
    /// speak of it. Never waits: when the buffer is full, after a long outage, the oldest reading in
    /// it is dropped, which is counted and told by [`Answer::Dropped`].
    ///
    /// # Errors
    /// [`Closed`] if the daemon refused the stream.
    pub fn report(&self, reading: Reading) -> Result<u64, Closed> {
        self.line.push(reading).map_err(|_| Closed)
    }

    /// Hands over a reading of a record, of which none is to be missed: waits while the buffer is full.
    /// Otherwise as [`Reporter::report`].
    ///
    /// # Errors
    /// [`Closed`] if the daemon refused the stream.
    pub async fn report_when_room(&mut self, reading: Reading) -> Result<u64, Closed> {
        self.line.push_when_room(reading).await.map_err(|_| Closed)
    }

    /// Readings that were dropped so far because the buffer was full.
    pub fn dropped(&self) -> u64 {
        self.line.dropped()
    }
}

/// What comes back for readings.
#[derive(Clone, Debug, PartialEq)]
#[non_exhaustive]
pub enum Answer {
    /// The receipt of a batch.
    Receipt(Receipt),
    /// These readings were dropped, unsent, because newer ones needed their room in the buffer. Told
    /// when the ones after them are sent.
    Dropped(Range<u64>),
    /// Contact was lost; batches without a receipt are sent again when it is back.
    Lost(Loss),
    /// Contact is back.
    Regained,
}

/// The receipt of a batch.
#[derive(Clone, Debug, PartialEq)]
pub struct Receipt {
    /// The readings it speaks of.
    pub readings: Range<u64>,
    /// What it promises for those that were not refused.
    pub promise: Promise,
    /// Readings taken in.
    pub accepted: u64,
    /// Readings not taken in. They changed nothing.
    pub refused: Vec<RefusedReadings>,
    /// House time of the receipt, ns.
    pub house_ns: i64,
}

/// Why readings were refused.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct RefusedReadings {
    /// Which: one, or a whole batch.
    pub readings: Range<u64>,
    /// Path of the field at fault.
    pub field: String,
    /// The value that was sent.
    pub value: String,
    /// What would have been accepted.
    pub accepted: String,
}

/// Where receipts come out. Take them while reporting: when a few hundred wait, nothing more is sent.
/// Drop it if they don't matter.
#[derive(Debug)]
pub struct Receipts {
    answers: mpsc::Receiver<Result<Answer, CallError>>,
}

impl Receipts {
    /// The next answer; `None` after the last. Cancel safe.
    ///
    /// # Errors
    /// Only what trying again would not mend. It ends the stream.
    pub async fn next(&mut self) -> Result<Option<Answer>, CallError> {
        self.answers.recv().await.transpose()
    }
}

/// Starts the task that sends.
pub(crate) fn open(client: Client, options: ReportOptions) -> (Reporter, Receipts) {
    let (entrance, exit) = line(options.buffer_readings);
    let (answers, receipts) = mpsc::channel(ANSWERS);
    let level = match options.promise {
        Promise::Applied => v1::ReceiptLevel::Applied,
        Promise::Durable => v1::ReceiptLevel::Durable,
    };
    let largest = options.buffer_readings.clamp(1, LARGEST_BATCH);
    let size = options.batch_readings.clamp(1, largest);
    let sender = Sender {
        client,
        gatherer: Gatherer::new(exit, size, options.linger, level),
        unreceipted: VecDeque::new(),
        taken: 0,
        answers,
        backoff: Backoff::default(),
        lost: false,
    };
    tokio::spawn(sender.run());
    (Reporter { line: entrance }, Receipts { answers: receipts })
}

/// The task behind a reporter.
struct Sender {
    client: Client,
    gatherer: Gatherer,
    /// Oldest first: receipts come in the order of their batches.
    unreceipted: VecDeque<Batch>,
    /// Readings before this one were sent or dropped.
    taken: u64,
    answers: mpsc::Sender<Result<Answer, CallError>>,
    backoff: Backoff,
    lost: bool,
}

impl Sender {
    async fn run(mut self) {
        while let Err(error) = self.session().await {
            let CallError::Unreachable { reason, .. } = error else {
                self.tell(Err(error)).await;
                return;
            };
            self.lost = true;
            let retry_in = self.backoff.next_delay();
            self.tell(Ok(Answer::Lost(Loss { reason, retry_in }))).await;
            sleep(retry_in).await;
        }
    }

    /// One call, from its opening to the last receipt; an error if it broke off before.
    async fn session(&mut self) -> Result<(), CallError> {
        let (outbound, requests) = mpsc::channel(UNRECEIPTED + 1);
        for batch in &self.unreceipted {
            let room = outbound.try_send(batch.request.clone());
            room.expect("the channel is longer than what can be unreceipted");
        }
        let place = self.client.hosts().place();
        let mut stub = self.client.reading_stub();
        let opened = stub.report_readings(ReceiverStream::new(requests)).await;
        let mut inbound = opened
            .map_err(|status| self.client.hosts().error(place, &status))?
            .into_inner();
        if std::mem::take(&mut self.lost) {
            self.tell(Ok(Answer::Regained)).await;
        }
        let mut outbound = Some(outbound);
        loop {
            let room = outbound.is_some() && self.unreceipted.len() < UNRECEIPTED;
            tokio::select! {
                batch = self.gatherer.next_batch(), if room => match (batch, &outbound) {
                    (Some(batch), Some(open)) => {
                        let dropped = self.taken..batch.readings.start;
                        self.taken = batch.readings.end;
                        let request = batch.request.clone();
                        self.unreceipted.push_back(batch);
                        if !dropped.is_empty() {
                            self.tell(Ok(Answer::Dropped(dropped))).await;
                        }
                        // A closed channel is a broken stream, which the other branch will find.
                        let _ = open.send(request).await;
                    }
                    // All is said: closing our half asks for the last receipts.
                    _ => outbound = None,
                },
                received = inbound.message() => {
                    match received.map_err(|status| self.client.hosts().error(place, &status))? {
                        Some(response) => self.receipt(response).await,
                        None if outbound.is_none() && self.unreceipted.is_empty() => return Ok(()),
                        None => {
                            let ended = Status::unavailable("the daemon ended the stream");
                            return Err(self.client.hosts().error(place, &ended));
                        }
                    }
                }
            }
        }
    }

    async fn receipt(&mut self, response: v1::ReportReadingsResponse) {
        let known = self
            .unreceipted
            .iter()
            .position(|b| b.request.batch == response.batch);
        let Some(batch) = known.and_then(|index| self.unreceipted.remove(index)) else {
            return;
        };
        self.backoff.reset();
        let promise = match response.level() {
            v1::ReceiptLevel::Applied => Promise::Applied,
            _ => Promise::Durable,
        };
        let refused = response
            .refusals
            .into_iter()
            .map(|refusal| RefusedReadings {
                readings: refused_range(&batch.readings, refusal.index),
                field: refusal.field,
                value: refusal.value,
                accepted: refusal.accepted,
            });
        let refused = refused.collect();
        let (accepted, house_ns) = (response.accepted, response.house_ns);
        let readings = batch.readings;
        let receipt = Receipt {
            readings,
            promise,
            accepted,
            refused,
            house_ns,
        };
        self.tell(Ok(Answer::Receipt(receipt))).await;
    }

    async fn tell(&self, answer: Result<Answer, CallError>) {
        // A caller that dropped its receipts doesn't care for them.
        let _ = self.answers.send(answer).await;
    }
}

/// The reading at `index` of a batch; a negative index speaks of all of it.
fn refused_range(batch: &Range<u64>, index: i32) -> Range<u64> {
    match u64::try_from(index) {
        Ok(index) => batch.start + index..batch.start + index + 1,
        Err(_) => batch.clone(),
    }
}
