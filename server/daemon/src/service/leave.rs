//! When open streams have to end: as the daemon drains, or as their connection gets old. They end
//! with a word that says so, and how long to wait, so that their clients go elsewhere.

use tonic::Request;

use super::Access;
use crate::{
    readiness::Readiness,
    refused::{Refused, Why},
    transport::Age,
};

/// The end of the streams of one connection.
#[derive(Clone, Debug)]
pub(super) struct Leave {
    readiness: Readiness,
    /// Absent where no connection is known.
    age: Option<Age>,
}

impl Leave {
    pub(super) fn of<T>(access: &Access, request: &Request<T>) -> Self {
        Self {
            readiness: access.readiness.clone(),
            age: request.extensions().get::<Age>().copied(),
        }
    }

    /// Waits until it is time to go, and gives what to say then. Cancel safe.
    pub(super) async fn due(&self) -> Refused {
        let aged = async {
            match self.age {
                Some(age) => age.reached().await,
                None => std::future::pending().await,
            }
        };
        tokio::select! {
            () = self.readiness.draining() => Refused::GoingAway(Why::Stopping),
            () = aged => Refused::GoingAway(Why::OldConnection),
        }
    }
}
