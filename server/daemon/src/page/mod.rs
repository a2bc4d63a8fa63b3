//! The port for people and Prometheus.

use std::sync::Arc;

use axum::Router;

use crate::{board::Board, house::HouseClock, readiness::Readiness};

/// The routes of the people's port.
pub fn router(_board: Arc<Board>, _house: HouseClock, _readiness: Readiness) -> Router {
    Router::new()
}
