//! The planner: rates, bounds and drifts in; the ladder, two ratios in turn, stages and their costs out.
//! The question is in the address.

mod answer;
mod form;
mod tables;

use std::sync::Arc;

use axum::{
    Router,
    extract::Query,
    http::StatusCode,
    response::{IntoResponse, Response},
    routing::get,
};
use maud::html;
use tokio::sync::Semaphore;

use super::{
    Sources,
    frame::{self, Leaf, Place},
};
use crate::convert::plan;
use form::{Faults, Form};

/// Plans that are worked out at once; more wait. Some take seconds, and the daemon has other work.
const AT_ONCE: usize = 2;

pub(super) fn router() -> Router<Sources> {
    let turn = Arc::new(Semaphore::new(AT_ONCE));
    Router::new().route(
        "/plan",
        get(async move |Query(form): Query<Form>| show(form, turn).await),
    )
}

async fn show(form: Form, turn: Arc<Semaphore>) -> Response {
    let is_example = form.is_empty();
    let form = if is_example { Form::example() } else { form };
    let answered = match form.request() {
        Ok(request) => worked_out(request, turn).await,
        Err(faults) => Err(faults),
    };
    let (status, faults, answer) = match answered {
        Ok(answer) => (StatusCode::OK, Faults::default(), Some(answer)),
        Err(faults) => (StatusCode::BAD_REQUEST, faults, None),
    };
    let body = html! {
        h1 #headline { "Planner" }
        p .note {
            "What ratio suits two rates within the bounds of a filter bank, and what it costs. Nothing is \
             kept: the whole question is in the address, so that it can be handed on."
        }
        (form.fields(&faults))
        @if is_example { p #example { "This is an example: put in your own rates." } }
        @if let Some(answer) = &answer { (answer.markup()) }
    };
    let leaf = Leaf {
        title: "planner".to_owned(),
        place: Place::Planner,
        as_of_ns: None,
        body,
    };
    (status, leaf).into_response()
}

/// Works a plan out on a thread where long sums hold up nobody.
async fn worked_out(
    request: ratewright_proto::v1::PlanRatioRequest,
    turn: Arc<Semaphore>,
) -> Result<answer::Answer, Faults> {
    let _turn = turn.acquire().await;
    let question = plan::question(request.clone()).map_err(Faults::from)?;
    let found = tokio::task::spawn_blocking(move || plan::answer(&question)).await;
    let response = found.map_err(|_| Faults::of_all("the daemon is stopping"))??;
    answer::Answer::new(request, response).ok_or_else(|| Faults::of_all(frame::OF_THE_PROGRAM))
}
