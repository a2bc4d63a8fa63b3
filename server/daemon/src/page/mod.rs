//! The port for people and Prometheus.
//!
//! | path | what |
//! | --- | --- |
//! | `/` | the facility at a glance: what needs a look first |
//! | `/crossings`, `/clocks` | all of them, the worst first, to be searched and leafed through |
//! | `/changes` | what changed in the last hour |
//! | `/crossings/{id}`, `/clocks/{id}` | one of them, closely |
//! | `/crossings/{id}/settings` | every setting it ever had |
//! | `/crossings/{id}/settings/{epoch}-{number}` | one setting, and why it was made |
//! | `/plan` | a planner; the question is in the address, so that it can be handed on |
//! | `/metrics` | for Prometheus, see [`crate::metrics`] |
//! | `/livez` | 200 while the process answers |
//! | `/readyz` | 200 while everything is served, else 503; a clock in holdover does not make it so |
//!
//! The pages are plain HTML from the server, with pictures in them. They work without a script; with one
//! they renew themselves in place. Nothing can be changed by them, nothing is fetched from another host,
//! and the browser is told to allow none.

mod attention;
mod changes;
mod clock;
mod clocks;
mod crossing;
mod crossings;
mod facility;
mod figures;
mod fractions;
mod frame;
mod hand;
mod listing;
mod plan;
mod probes;
mod settings;
mod steadiness;
mod words;

use std::sync::Arc;

use axum::{
    Router,
    extract::State,
    http::{StatusCode, header},
    response::{IntoResponse, Response},
    routing::get,
};
use ratewright_control::Engine;

use crate::{
    board::Board,
    house::HouseClock,
    metrics,
    readiness::{Phase, Readiness},
    scribe::Desk,
    store::History,
};

/// What the pages are made from. Cheap to clone.
#[derive(Clone, Debug)]
pub(crate) struct Sources {
    pub(crate) board: Arc<Board>,
    pub(crate) house: HouseClock,
    pub(crate) readiness: Readiness,
    pub(crate) desk: Desk,
    pub(crate) history: History,
}

/// The routes of the people's port.
pub(crate) fn router(sources: Sources) -> Router {
    Router::new()
        .route("/", get(facility::show))
        .route("/crossings", get(listing::crossings))
        .route("/clocks", get(listing::clocks))
        .route("/changes", get(changes::show))
        .route("/clocks/{id}", get(clock::show))
        .route("/crossings/{id}", get(crossing::show))
        .route("/crossings/{id}/settings", get(settings::list))
        .route("/crossings/{id}/settings/{numbered}", get(settings::show))
        .merge(plan::router())
        .route(
            "/page.css",
            get(async || typed("text/css; charset=utf-8", frame::style_sheet())),
        )
        .route(
            "/page.js",
            get(async || {
                typed(
                    "text/javascript; charset=utf-8",
                    include_str!("page.js").into(),
                )
            }),
        )
        .route("/metrics", get(scrape))
        .route("/livez", get(async || "alive\n"))
        .route("/readyz", get(ready))
        .fallback(async || frame::not_found("Nothing is at this address."))
        .with_state(sources)
}

impl Sources {
    /// What the engine says to a question about one thing, or the page that says why it does not.
    async fn ask<T: Send + 'static>(
        &self,
        question: impl FnOnce(&Engine) -> T + Send + 'static,
    ) -> Result<T, Response> {
        let why = match self.readiness.phase() {
            Phase::Recovering => "The daemon is recovering its store.".to_owned(),
            Phase::Serving | Phase::Draining => match self.desk.ask(question).await {
                Ok(answer) => return Ok(answer),
                Err(refused) => words::sentence(&refused.to_string()),
            },
        };
        Err(frame::trouble(
            StatusCode::SERVICE_UNAVAILABLE,
            "Not now",
            &why,
        ))
    }
}

async fn scrape(State(sources): State<Sources>) -> impl IntoResponse {
    let clocks = metrics::steadied(&sources.board);
    let look = |engine: &Engine| -> Vec<metrics::Steadiness> {
        let each = clocks.into_iter();
        each.map(|id| (id.clone(), engine.stability(&id))).collect()
    };
    // While the engine cannot be asked, the rest is still there to be scraped.
    let steadiness = sources.ask(look).await.unwrap_or_default();
    let text = metrics::render(&sources.board, sources.house.now(), &steadiness);
    (
        [(
            header::CONTENT_TYPE,
            "text/plain; version=0.0.4; charset=utf-8",
        )],
        text,
    )
}

async fn ready(State(sources): State<Sources>) -> impl IntoResponse {
    match sources.readiness.phase() {
        Phase::Serving => (StatusCode::OK, "serving\n"),
        Phase::Recovering => (StatusCode::SERVICE_UNAVAILABLE, "recovering\n"),
        Phase::Draining => (StatusCode::SERVICE_UNAVAILABLE, "draining\n"),
    }
}

fn typed(kind: &'static str, text: String) -> Response {
    let headers = [
        (header::CONTENT_TYPE, kind),
        (header::X_CONTENT_TYPE_OPTIONS, "nosniff"),
    ];
    (headers, text).into_response()
}

#[cfg(test)]
mod tests;
