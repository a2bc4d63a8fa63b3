//! Planning: a question of arithmetic, which needs nothing that the daemon holds.

use ratewright_proto::v1;

use crate::{convert::plan, refused::Refused};

/// Answers on a thread where long sums hold up nobody: bounds on prime factors are searched.
pub(super) async fn plan(sent: v1::PlanRatioRequest) -> Result<v1::PlanRatioResponse, Refused> {
    let question = plan::question(sent)?;
    let answered = tokio::task::spawn_blocking(move || plan::answer(&question)).await;
    answered.unwrap_or(Err(Refused::Unavailable("stopping")))
}
