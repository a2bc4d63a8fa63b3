//! Readings of the fake.

use ratewright_proto::v1;
use tokio::sync::mpsc;
use tokio_stream::wrappers::ReceiverStream;
use tonic::{Request, Response, Status, Streaming};
use v1::reading::Measurement;
use v1::reading_service_server::ReadingService;

use super::{Facility, HOUSE_NS};

impl Facility {
    /// Takes a batch in; its receipt, unless batches go unreceipted just now.
    fn take_in(&self, batch: v1::ReportReadingsRequest) -> Option<v1::ReportReadingsResponse> {
        let mut known = self.known();
        let refusals: Vec<_> = batch
            .readings
            .iter()
            .enumerate()
            .filter(|(_, reading)| !known.clocks.contains_key(&reading.clock))
            .map(|(index, reading)| v1::Refusal {
                index: i32::try_from(index).expect("a batch is short"),
                field: format!("readings[{index}].clock"),
                value: reading.clock.clone(),
                accepted: "a declared clock".to_owned(),
            })
            .collect();
        let receipt = v1::ReportReadingsResponse {
            batch: batch.batch,
            level: batch.receipt,
            accepted: (batch.readings.len() - refusals.len()) as u64,
            refusals,
            house_ns: HOUSE_NS,
        };
        known.batches.push(batch);
        if known.silent_batches > 0 {
            known.silent_batches -= 1;
            return None;
        }
        Some(receipt)
    }
}

#[tonic::async_trait]
impl ReadingService for Facility {
    type ReportReadingsStream = ReceiverStream<Result<v1::ReportReadingsResponse, Status>>;

    async fn report_readings(
        &self,
        request: Request<Streaming<v1::ReportReadingsRequest>>,
    ) -> Result<Response<Self::ReportReadingsStream>, Status> {
        self.known().streams += 1;
        let (sender, receiver) = mpsc::channel(64);
        let facility = self.clone();
        let mut batches = request.into_inner();
        tokio::spawn(async move {
            while let Ok(Some(batch)) = batches.message().await {
                let frequency =
                    batch
                        .readings
                        .iter()
                        .find_map(|reading| match &reading.measurement {
                            Some(Measurement::Frequency(frequency)) => Some(frequency.deviation),
                            _ => None,
                        });
                // A deviation of 0 stands for a stream that the daemon will not have at all.
                if frequency == Some(0.0) {
                    let _ = sender.send(Err(Status::permission_denied("not you"))).await;
                    return;
                }
                if let Some(receipt) = facility.take_in(batch)
                    && sender.send(Ok(receipt)).await.is_err()
                {
                    return;
                }
            }
        });
        Ok(Response::new(ReceiverStream::new(receiver)))
    }

    async fn exchange_time(
        &self,
        request: Request<v1::ExchangeTimeRequest>,
    ) -> Result<Response<v1::ExchangeTimeResponse>, Status> {
        let t1_ns = request.into_inner().t1_ns;
        let (t2_ns, t3_ns) = (HOUSE_NS, HOUSE_NS + 1_000);
        Ok(Response::new(v1::ExchangeTimeResponse {
            t1_ns,
            t2_ns,
            t3_ns,
        }))
    }
}
