//! The calls of `ratewright.v1`. They check, ask the scribe or read the board, and convert: no
//! call decides anything about a ratio.

mod clocks;
mod crossings;
mod etag;
mod feed;
mod follow;
mod leave;
mod mask;
mod paging;
mod plan;
mod ratios;
mod readings;
mod slots;
mod status;

use std::{pin::Pin, sync::Arc};

use ratewright_proto::v1::{
    clock_service_server::ClockServiceServer, crossing_service_server::CrossingServiceServer,
    ratio_service_server::RatioServiceServer, reading_service_server::ReadingServiceServer,
};
use tokio_stream::Stream;
use tonic::{
    Request, Status,
    service::{RoutesBuilder, interceptor::InterceptedService},
};

use crate::{
    board::Board,
    house::HouseClock,
    readiness::{Phase, Readiness},
    refused::{Refused, Why},
    scribe::Desk,
    store::History,
};

use slots::Slot;
pub(crate) use slots::Slots;

/// Bytes a message to the daemon may have. A full batch of readings takes less than half.
const MAX_MESSAGE: usize = 1 << 20;

/// What an answer that goes on is made of.
type Answers<T> = Pin<Box<dyn Stream<Item = Result<T, Status>> + Send>>;

/// What the calls may reach.
#[derive(Clone, Debug)]
pub(crate) struct Access {
    pub(crate) desk: Desk,
    pub(crate) board: Arc<Board>,
    pub(crate) history: History,
    pub(crate) house: HouseClock,
    pub(crate) readiness: Readiness,
    pub(crate) slots: Slots,
}

/// The four services, each behind the gate.
pub(crate) fn add_to(routes: &mut RoutesBuilder, access: &Access) {
    let gate = Gate(access.readiness.clone());
    let clocks = ClockServiceServer::new(clocks::Clocks(access.clone()));
    let crossings = CrossingServiceServer::new(crossings::Crossings(access.clone()));
    let readings = ReadingServiceServer::new(readings::Readings(access.clone()));
    let ratios = RatioServiceServer::new(ratios::Ratios(access.clone()));
    routes
        .add_service(InterceptedService::new(
            clocks.max_decoding_message_size(MAX_MESSAGE),
            gate.clone(),
        ))
        .add_service(InterceptedService::new(
            crossings.max_decoding_message_size(MAX_MESSAGE),
            gate.clone(),
        ))
        .add_service(InterceptedService::new(
            readings.max_decoding_message_size(MAX_MESSAGE),
            gate.clone(),
        ))
        .add_service(InterceptedService::new(
            ratios.max_decoding_message_size(MAX_MESSAGE),
            gate,
        ));
}

/// Lets calls through while the daemon serves.
#[derive(Clone, Debug)]
struct Gate(Readiness);

impl tonic::service::Interceptor for Gate {
    fn call(&mut self, request: Request<()>) -> Result<Request<()>, Status> {
        match self.0.phase() {
            Phase::Serving => Ok(request),
            Phase::Recovering => Err(Refused::Unavailable("recovering its store").into()),
            Phase::Draining => Err(Refused::GoingAway(Why::Stopping).into()),
        }
    }
}
