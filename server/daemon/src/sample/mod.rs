//! The sample facility: Radio Lanternsea, an invented place whose clocks report to a daemon over gRPC
//! exactly as real ones would, at the pace of the daemon's house time.
//!
//! Its life is a function of house time and of the instant at which it began, and that instant is what
//! the daemon itself remembers: the first setting of the facility's first crossing was decided when the
//! crossing was declared. A daemon that was killed and started again on the same store therefore finds
//! the same clocks where they would have been, with the readings of the time between missing.

mod declare;
mod follow;
mod report;
mod summary;
mod tell;

use std::{net::SocketAddr, path::PathBuf};

use ratewright_client::{CallError, Client};
use ratewright_rehearsal::{Facility, PlanError, sample};
use thiserror::Error;

use crate::{config::Config, house::HouseClock};

/// Configuration of a daemon that serves the sample facility.
pub fn config(store: PathBuf) -> Config {
    Config {
        store,
        ..Config::default()
    }
}

/// Why the sample facility stopped.
#[derive(Debug, Error)]
pub enum SampleError {
    /// The daemon could not be reached, or refused the facility.
    #[error("{0}")]
    Call(#[from] CallError),
    /// The plan cannot be; a fault of the program.
    #[error("the plan of the sample facility: {0}")]
    Plan(#[from] PlanError),
    /// The daemon ended the report stream.
    #[error("the daemon ended the report stream")]
    Closed,
    /// The summary cannot be written.
    #[error("standard output: {0}")]
    Output(#[from] std::io::Error),
}

/// Plays the sample facility against the daemon at `grpc`, at the pace of `house`, and tells standard
/// output how it fares; `people` is where the daemon's page is. Goes on until the future is dropped.
///
/// # Errors
/// [`SampleError`] if the daemon cannot be reached or refuses the facility.
pub async fn run(
    grpc: SocketAddr,
    people: SocketAddr,
    house: HouseClock,
) -> Result<(), SampleError> {
    let client = Client::connect(&format!("http://{grpc}")).await?;
    let plan = sample::plan();
    let origin_ns = declare::all(&client, &plan, house.now()).await?;
    let mut facility = Facility::new(plan, sample::SEED, origin_ns)?;
    facility.skip_to(house.now());
    let page = format!("http://{people}/");
    tokio::select! {
        ended = report::forever(&client, facility, house) => ended,
        ended = follow::forever(&client, house) => ended,
        ended = tell::forever(&client, house, origin_ns, &page) => ended,
    }
}

#[cfg(test)]
mod tests;
