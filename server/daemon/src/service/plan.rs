//! Planning: a question of arithmetic, which needs nothing that the daemon holds.

use ratewright_proto::v1;
use ratewright_ratio::plan as ratio;

use crate::{convert::plan, refused::Refused};

/// Answers on a thread where long sums hold up nobody: bounds on prime factors are searched.
pub(super) async fn plan(sent: v1::PlanRatioRequest) -> Result<v1::PlanRatioResponse, Refused> {
    let question = plan::question(sent)?;
    let answer = move || plan::plan_to_wire(&question, &ratio::plan(&question.query));
    let answered = tokio::task::spawn_blocking(answer).await;
    answered.map_err(|_| Refused::Unavailable("stopping"))
}
