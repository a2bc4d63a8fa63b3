//! One clock, closely.

use axum::{
    extract::{Path, Query, State},
    response::{IntoResponse, Response},
};
use maud::{Markup, html};
use ratewright_control::{Engine, HouseNs, Id, LinkView};
use ratewright_timing::State as Standing;

use super::{
    Sources, changes, clocks, crossings,
    figures::{self, AskedSpan},
    frame::{self, Leaf, Place},
    probes, steadiness, words,
};
use crate::{
    board::{Board, ClockView},
    chronicle::Span,
};

pub(super) async fn show(
    State(sources): State<Sources>,
    Path(name): Path<String>,
    Query(asked): Query<AskedSpan>,
) -> Response {
    let found = Id::new(&name).ok().and_then(|id| sources.board.clock(&id));
    let Some(view) = found else {
        return frame::not_found("No clock of this name is declared.");
    };
    let now = sources.house.now();
    let id = view.declaration.id.clone();
    let look = move |engine: &Engine| (engine.links(&id, now), engine.stability(&id));
    let (links, octaves) = match sources.ask(look).await {
        Ok((links, octaves)) => (links.unwrap_or_default(), octaves),
        Err(answer) => return answer,
    };
    let body = html! {
        (head(&view))
        (figures(&view, now))
        (drift(&sources.board, &view, &asked, now))
        (probe_section(&view, &links, now))
        @if !view.declaration.exact {
            (steadiness::section(view.declaration.statistics, &octaves))
        }
        (users(&sources.board, &view.declaration.id))
        section #changed aria-labelledby="changed-head" {
            h2 #changed-head { "Changed in the last hour" }
            (changes::list(&happened(&sources.board, &view, now), now))
        }
    };
    Leaf {
        title: clocks::title(&view).to_owned(),
        place: Place::Clocks,
        as_of_ns: Some(now),
        body,
    }
    .into_response()
}

fn head(view: &ClockView) -> Markup {
    let estimate = &view.estimate.estimate;
    let (state, class) = words::clock_state(estimate.state);
    html! {
        p .kind { "Clock " code { (view.declaration.id) } }
        h1 #headline { (clocks::title(view)) }
        p #state .verdict.(class) role="status" {
            span .state { (state) } ": " (words::why_state(estimate.reason)) "."
            @if let Some(seconds) = estimate.lock_expected_in_s {
                " A lock is expected in about " (words::span(seconds)) "."
            }
        }
        @if let Some(fault) = &view.estimate.fault {
            p #fault .verdict.adrift { span .state { "at fault" } ": " (fault) "." }
        }
    }
}

fn figures(view: &ClockView, now: HouseNs) -> Markup {
    let (declared, estimate) = (&view.declaration, &view.estimate.estimate);
    let measured = view.estimate.measured && !declared.exact;
    let drift = html! {
        @if declared.exact { "0 by definition" }
        @else if !measured { "not measured" }
        @else {
            span .figure { (words::ppm(estimate.drift)) " \u{b1} " (words::half_width_ppm(estimate.half_width())) " ppm" }
            span .aside { @if estimate.drift > 0.0 { "runs fast" } @else { "runs slow" } }
        }
    };
    let changing = html! {
        @if measured { (words::ppb(estimate.drift_rate_per_s * 3_600.0)) " ppb an hour" } @else { "\u{2014}" }
    };
    let unread = html! {
        @if measured { "\u{b1} " (words::half_width_ppm(1.96 * estimate.drift_deviation_after(3_600.0))) " ppm" }
        @else { "\u{2014}" }
    };
    let tolerance = html! {
        @if declared.tolerance_ppm > 0.0 { "\u{b1}" (declared.tolerance_ppm) " ppm" } @else { "none is declared" }
    };
    let age = clocks::reading_age_s(view, now);
    words::facts(
        "figures",
        [
            ("Drift, 95 %", drift),
            ("Nominal rate", html! { (words::rate(declared.nominal_hz)) }),
            ("Drift changes by", changing),
            ("Unread for an hour it would be known to", unread),
            ("Its maker's tolerance", tolerance),
            (
                "Last reading",
                html! { (age.map_or("\u{2014}".to_owned(), |s| format!("{} ago", words::span(s)))) },
            ),
        ],
    )
}

fn drift(board: &Board, view: &ClockView, asked: &AskedSpan, now: HouseNs) -> Markup {
    let span = asked.span(&board.drift_history(&view.declaration.id, Span::Hours, now));
    let points = board.drift_history(&view.declaration.id, span, now);
    html! {
        section #drift aria-labelledby="drift-head" {
            h2 #drift-head { "Drift over time" }
            @if view.declaration.exact {
                p .calm { "This clock is house time itself: it cannot drift against it." }
            } @else {
                (AskedSpan::choice(span))
                @if points.len() < 2 {
                    p .calm { "Too little was measured in this time for a picture." }
                } @else {
                    (figures::course("drift-picture", &figures::drift(&points, &happened(board, view, now), span, now)))
                    (figures::course("gained-picture", &figures::gained(&points, span, now)))
                }
            }
        }
    }
}

fn probe_section(view: &ClockView, links: &[LinkView], now: HouseNs) -> Markup {
    html! {
        section #probes aria-labelledby="probes-head" {
            h2 #probes-head { "Who reads it" }
            @if !links.is_empty() {
                (probes::table(links, now))
            } @else if view.estimate.estimate.state == Standing::Locked {
                p .calm { "Nobody: it is house time by definition." }
            } @else {
                p .calm { "Nobody has read it yet." }
            }
        }
    }
}

fn users(board: &Board, id: &Id) -> Markup {
    let all = board.crossings(None, usize::MAX);
    let uses = |view: &&_| {
        let view: &crate::board::CrossingView = view;
        view.declaration.source == *id || view.declaration.sink == *id
    };
    let using: Vec<_> = all.iter().map(AsRef::as_ref).filter(uses).collect();
    html! {
        section #users aria-labelledby="users-head" {
            h2 #users-head { "What rests on it" }
            @if using.is_empty() { p .calm { "No crossing uses it." } }
            ul .plain {
                @for view in using {
                    @let (state, class) = words::crossing_state(view.status.state);
                    li .(class) { (crossings::link(view)) ": " span .state { (state) } }
                }
            }
        }
    }
}

fn happened(board: &Board, view: &ClockView, now: HouseNs) -> Vec<crate::chronicle::Happening> {
    changes::lately_of(board, now, |h| h.clock() == Some(&view.declaration.id))
}
