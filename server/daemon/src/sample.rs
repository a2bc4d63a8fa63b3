//! The sample facility: an invented place whose clocks report to a daemon over gRPC.

use std::path::PathBuf;

use crate::{config::Config, house::HouseClock};

/// Configuration of a daemon that serves the sample facility.
pub fn config(store: PathBuf) -> Config {
    Config { store, ..Config::default() }
}

/// Plays the sample facility against the daemon at `grpc`, at the pace of `house`, until the
/// future is dropped.
///
/// # Errors
/// [`SampleError`] if the daemon cannot be reached or refuses the facility.
pub async fn run(_grpc: std::net::SocketAddr, _house: HouseClock) -> Result<(), SampleError> {
    std::future::pending().await
}

/// Why the sample facility stopped.
#[derive(Debug, thiserror::Error)]
pub enum SampleError {}
