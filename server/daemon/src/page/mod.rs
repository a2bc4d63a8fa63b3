//! The port for people and Prometheus.
//!
//! | path | what |
//! | --- | --- |
//! | `/` | the status page: what needs a look first, then every crossing and every clock, worst first |
//! | `/metrics` | for Prometheus, see [`crate::metrics`] |
//! | `/livez` | 200 while the process answers |
//! | `/readyz` | 200 while everything is served, else 503; a clock in holdover does not make it so |
//!
//! The page is plain HTML from the server. It works without a script; with one it renews itself in place.
//! Nothing is fetched from another host, and the browser is told to allow none.

mod attention;
mod clocks;
mod crossings;
mod frame;
mod words;

use std::sync::Arc;

use axum::{
    Router,
    extract::State,
    http::{StatusCode, header},
    response::{Html, IntoResponse},
    routing::get,
};

use crate::{
    board::Board,
    house::HouseClock,
    metrics,
    readiness::{Phase, Readiness},
};

#[derive(Clone)]
struct Sources {
    board: Arc<Board>,
    house: HouseClock,
    readiness: Readiness,
}

/// The routes of the people's port.
pub fn router(board: Arc<Board>, house: HouseClock, readiness: Readiness) -> Router {
    Router::new()
        .route("/", get(status))
        .route(
            "/page.css",
            get(async || typed("text/css; charset=utf-8", include_str!("page.css"))),
        )
        .route(
            "/page.js",
            get(async || typed("text/javascript; charset=utf-8", include_str!("page.js"))),
        )
        .route("/metrics", get(scrape))
        .route("/livez", get(async || "alive\n"))
        .route("/readyz", get(ready))
        .with_state(Sources {
            board,
            house,
            readiness,
        })
}

async fn status(State(sources): State<Sources>) -> impl IntoResponse {
    let mut crossings = sources.board.crossings(None, usize::MAX);
    let mut clocks = sources.board.clocks(None, usize::MAX);
    crossings.sort_by_key(|view| crossings::urgency(view));
    clocks.sort_by_key(|view| clocks::urgency(view));
    let page = frame::page(sources.house.now(), &crossings, &clocks);
    let headers = [
        (
            header::CONTENT_SECURITY_POLICY,
            "default-src 'none'; style-src 'self'; script-src 'self'; connect-src 'self'; \
             img-src data:; base-uri 'none'; form-action 'none'; frame-ancestors 'none'",
        ),
        (header::CACHE_CONTROL, "no-store"),
        (header::X_CONTENT_TYPE_OPTIONS, "nosniff"),
        (header::REFERRER_POLICY, "no-referrer"),
    ];
    (headers, Html(page.into_string()))
}

async fn scrape(State(sources): State<Sources>) -> impl IntoResponse {
    let text = metrics::render(&sources.board, sources.house.now());
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

fn typed(kind: &'static str, text: &'static str) -> impl IntoResponse {
    (
        [
            (header::CONTENT_TYPE, kind),
            (header::X_CONTENT_TYPE_OPTIONS, "nosniff"),
        ],
        text,
    )
}

#[cfg(test)]
mod tests;
