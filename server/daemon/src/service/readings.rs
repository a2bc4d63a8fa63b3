//! ReadingService.
//!
//! A stream of batches is taken in by one task, which hands each batch to the scribe and goes on
//! to the next; the receipts follow in order as the scribe answers. At most [`AHEAD`] batches of
//! a stream are on their way.

use std::pin::pin;

use ratewright_proto::v1::{self, reading_service_server::ReadingService};
use tokio::sync::mpsc;
use tokio_stream::{StreamExt as _, wrappers::ReceiverStream};
use tonic::{Request, Response, Status, Streaming};

use super::{Access, Answers, Slot, leave::Leave, slots::Kind};
use crate::{
    convert::reading::{self, Batch, Place},
    metrics,
    refused::Violation,
    scribe::{self, Promise},
};

/// Batches of one stream that may wait for their receipts.
const AHEAD: usize = 16;

#[derive(Debug)]
pub(super) struct Readings(pub(super) Access);

#[tonic::async_trait]
impl ReadingService for Readings {
    type ReportReadingsStream = Answers<v1::ReportReadingsResponse>;

    async fn report_readings(
        &self,
        request: Request<Streaming<v1::ReportReadingsRequest>>,
    ) -> Result<Response<Self::ReportReadingsStream>, Status> {
        let slot = self.0.slots.take(Kind::Report)?;
        let (sender, waiting) = mpsc::channel(AHEAD);
        let leave = Leave::of(&self.0, &request);
        let taken = take_in(self.0.clone(), request.into_inner(), sender, slot, leave);
        tokio::spawn(taken);
        let house = self.0.house;
        let receipts =
            ReceiverStream::new(waiting).then(move |waiting: Result<Waiting, Status>| async move {
                waiting?.receipt(house.now()).await
            });
        Ok(Response::new(Box::pin(receipts)))
    }

    async fn exchange_time(
        &self,
        request: Request<v1::ExchangeTimeRequest>,
    ) -> Result<Response<v1::ExchangeTimeResponse>, Status> {
        let t2_ns = self.0.house.now();
        let t1_ns = request.into_inner().t1_ns;
        let t3_ns = self.0.house.now();
        Ok(Response::new(v1::ExchangeTimeResponse {
            t1_ns,
            t2_ns,
            t3_ns,
        }))
    }
}

async fn take_in(
    access: Access,
    mut batches: Streaming<v1::ReportReadingsRequest>,
    receipts: mpsc::Sender<Result<Waiting, Status>>,
    _slot: Slot,
    leave: Leave,
) {
    let (mut due, mut gone) = (pin!(leave.due()), pin!(receipts.closed()));
    loop {
        let sent = tokio::select! {
            biased;
            () = &mut gone => return,
            why = &mut due => Err(why.into()),
            sent = batches.message() => sent,
        };
        let waiting = match sent {
            Ok(Some(batch)) => Ok(hand_in(&access, batch).await),
            Ok(None) => return,
            Err(status) => Err(status),
        };
        let ended = waiting.is_err();
        if receipts.send(waiting).await.is_err() || ended {
            return;
        }
    }
}

async fn hand_in(access: &Access, sent: v1::ReportReadingsRequest) -> Waiting {
    let (promise, level) = match v1::ReceiptLevel::try_from(sent.receipt) {
        Ok(v1::ReceiptLevel::Applied) => (Promise::Applied, v1::ReceiptLevel::Applied),
        Ok(_) => (Promise::Durable, v1::ReceiptLevel::Durable),
        Err(_) => return Waiting::refused_level(sent.batch, sent.receipt),
    };
    let Batch {
        events,
        places,
        refusals,
    } = reading::batch(sent.readings);
    let pending = if events.is_empty() {
        None
    } else {
        Some(access.desk.hand_in(events, promise).await)
    };
    Waiting {
        batch: sent.batch,
        level,
        places,
        refusals,
        pending,
    }
}

/// A batch that waits for the scribe.
struct Waiting {
    batch: u64,
    level: v1::ReceiptLevel,
    /// Of each reading that the scribe got.
    places: Vec<Place>,
    refusals: Vec<v1::Refusal>,
    /// Absent if the scribe got none.
    pending: Option<scribe::Pending>,
}

impl Waiting {
    fn refused_level(batch: u64, sent: i32) -> Self {
        let accepted = "RECEIPT_LEVEL_APPLIED (1), RECEIPT_LEVEL_DURABLE (2), or 0 for the latter";
        let refusals = vec![reading::refusal_of_all(Violation::new(
            "receipt", sent, accepted,
        ))];
        let level = v1::ReceiptLevel::Durable;
        Self {
            batch,
            level,
            places: Vec::new(),
            refusals,
            pending: None,
        }
    }

    async fn receipt(self, now: i64) -> Result<v1::ReportReadingsResponse, Status> {
        let mut refusals = self.refusals;
        let mut house_ns = now;
        let mut accepted = 0;
        if let Some(pending) = self.pending {
            let done = pending.answer().await?;
            house_ns = done.house_ns;
            accepted = done.events - done.refused.len();
            for (place, refusal) in done.refused {
                refusals.push(reading::refusal_by_engine(self.places[place], refusal));
            }
            refusals.sort_by_key(|refusal| refusal.index);
        }
        metrics::readings(accepted, refusals.len());
        let (batch, level) = (self.batch, self.level.into());
        Ok(v1::ReportReadingsResponse {
            batch,
            level,
            accepted: accepted as u64,
            refusals,
            house_ns,
        })
    }
}
