//! Health: not serving until the daemon is recovered, and not serving again once it drains.

use std::time::Duration;

use ratewright_proto::v1::{
    clock_service_server, crossing_service_server, ratio_service_server, reading_service_server,
};
use tokio::time::sleep;
use tonic::service::RoutesBuilder;
use tonic_health::{ServingStatus, server::HealthReporter};

use crate::readiness::{Phase, Readiness};

/// The daemon as a whole, and each of its services.
const SERVICES: [&str; 5] = [
    "",
    clock_service_server::SERVICE_NAME,
    crossing_service_server::SERVICE_NAME,
    reading_service_server::SERVICE_NAME,
    ratio_service_server::SERVICE_NAME,
];

/// Health watchers hear of the drain, and have this long to act before their streams end: the
/// health service has no end of its own, and an open stream would use up the whole grace.
const LAST_WORD: Duration = Duration::from_millis(500);

/// Adds the health service, which follows the daemon's readiness from now on.
pub(crate) async fn serve(routes: &mut RoutesBuilder, readiness: Readiness) {
    let (reporter, service) = tonic_health::server::health_reporter();
    routes.add_service(service);
    report(&reporter, ServingStatus::NotServing).await;
    tokio::spawn(follow(reporter, readiness));
}

async fn follow(reporter: HealthReporter, readiness: Readiness) {
    if readiness.wait_for(|phase| phase != Phase::Recovering).await == Phase::Serving {
        report(&reporter, ServingStatus::Serving).await;
    }
    readiness.draining().await;
    report(&reporter, ServingStatus::NotServing).await;
    sleep(LAST_WORD).await;
    for service in SERVICES {
        let mut reporter = reporter.clone();
        reporter.clear_service_status(service).await;
    }
}

async fn report(reporter: &HealthReporter, status: ServingStatus) {
    for service in SERVICES {
        reporter.set_service_status(service, status).await;
    }
}
