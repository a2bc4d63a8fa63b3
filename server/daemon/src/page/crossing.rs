//! One crossing, closely.

use axum::{
    extract::{Path, Query, State},
    response::{IntoResponse, Response},
};
use maud::{Markup, html};
use ratewright_control::{CrossingDeclaration, HouseNs, Id, PhaseForecast, Realisation};

use super::{
    Sources, changes, crossings,
    figures::{self, AskedSpan},
    fractions,
    frame::{self, Leaf, Place},
    hand, settings, words,
};
use crate::{
    board::{Board, CrossingView},
    chronicle::Span,
    convert::setting::setting_to_wire,
    store::Recorded,
};

/// Settings told on the page of their crossing.
const SETTINGS: usize = 6;

pub(super) async fn show(
    State(sources): State<Sources>,
    Path(name): Path<String>,
    Query(asked): Query<AskedSpan>,
) -> Response {
    let found = Id::new(&name)
        .ok()
        .and_then(|id| sources.board.crossing(&id));
    let Some(view) = found else {
        return frame::not_found("No crossing of this name is declared.");
    };
    let now = sources.house.now();
    let id = view.declaration.id.clone();
    let span = asked.span(&sources.board.phase_history(&id, Span::Hours, now));
    let after_s = figures::ahead_s(span);
    let of = id.clone();
    let forecast = match sources
        .ask(move |engine| engine.phase_forecast(&of, now, &after_s))
        .await
    {
        Ok(forecast) => forecast,
        Err(answer) => return answer,
    };
    let recorded = match sources.history.settings(id.clone(), None, SETTINGS).await {
        Ok(recorded) => recorded,
        Err(fault) => return settings::unreadable(&fault),
    };
    let acts = match sources.history.acts(id, None, hand::SHOWN).await {
        Ok(acts) => acts,
        Err(fault) => return settings::unreadable(&fault),
    };
    let body = html! {
        (head(&view))
        (besides(&view, now))
        (figures(&view, now))
        (phase(&sources.board, &view, forecast.as_ref(), span, now))
        (choice(&view))
        (history(&view, &recorded, now))
        (hand::section(&acts, now))
        (declared(&view.declaration))
        section #changed aria-labelledby="changed-head" {
            h2 #changed-head { "Changed in the last hour" }
            (changes::list(&happened(&sources.board, &view, now), now))
        }
    };
    Leaf {
        title: crossings::title(&view).to_owned(),
        place: Place::Crossings,
        as_of_ns: Some(now),
        body,
    }
    .into_response()
}

fn head(view: &CrossingView) -> Markup {
    let declared = &view.declaration;
    let (state, class) = words::crossing_state(view.status.state);
    let clock = |id: &Id| html! { a href={ "/clocks/" (id) } { (id) } };
    html! {
        p .kind { "Crossing " code { (declared.id) } ", from " (clock(&declared.source)) " to " (clock(&declared.sink)) }
        h1 #headline { (crossings::title(view)) }
        p #state .verdict.(class) role="status" { span .state { (state) } ": " (view.status.reason) "." }
    }
}

/// What the state does not tell: an operator's hand, a trial, another source, bounds that would do.
fn besides(view: &CrossingView, now: HouseNs) -> Markup {
    let (declared, status) = (&view.declaration, &view.status);
    html! {
        @if let Some(pin) = &status.pin {
            p #pin .verdict.nearing {
                span .state { "pinned" } ": what it runs stays, by " (pin.by) ", "
                (words::ago(pin.since_ns, now)) @if !pin.note.is_empty() { ": " (pin.note) } "."
            }
        }
        @if declared.silent {
            p #silent .verdict.nearing {
                span .state { "on trial" } ": settings are decided and recorded, but nobody is told to run them."
            }
        }
        @if status.source != declared.source {
            p #source .verdict.nearing {
                span .state { "changed over" } ": the stream comes from "
                a href={ "/clocks/" (status.source) } { (status.source) } " in place of "
                a href={ "/clocks/" (declared.source) } { (declared.source) } "."
            }
        }
        @if let Some(needed) = &status.needed {
            p #needed .verdict.adrift {
                span .state { "needs more room" } ": L up to " (needed.max_l()) " and M up to " (needed.max_m())
                " would do."
            }
        }
    }
}

fn figures(view: &CrossingView, now: HouseNs) -> Markup {
    let status = &view.status;
    let half = (status.target_high - status.target_low) / 2.0 / status.target;
    let target = html! {
        span .figure { (format!("{:.12}", status.target)) }
        span .aside { "\u{b1} " (words::parts(half)) ", from " (format!("{:.12}", status.target_low))
            " to " (format!("{:.12}", status.target_high)) }
    };
    let residual = html! {
        @match status.residual {
            Some(residual) => {
                span .figure { (words::ppb(residual)) " ppb" }
                span .aside { @if residual > 0.0 { "fills the sink's buffer" } @else { "drains the sink's buffer" } }
            }
            None => "\u{2014}",
        }
    };
    let phase = html! {
        span .figure { (words::samples(status.phase_error_samples)) " \u{b1} "
            (format!("{:.2}", 1.96 * status.phase_deviation_samples)) " samples" }
        span .aside { "of \u{b1}" (view.declaration.headroom_samples) " that the buffer takes" }
    };
    let alone = html! {
        @match status.seconds_to_slip {
            Some(seconds) => { "slips in " (words::span(seconds)) }
            None => "no slip in sight",
        }
    };
    let vouched = html! {
        @match status.seconds_vouched {
            Some(seconds) => { "for " (words::span(seconds)) " more" }
            None => "for a day and more",
        }
        span .aside { "if no further reading comes, however it is set" }
    };
    let review = html! {
        @match &status.setting {
            Some(setting) => {
                @if setting.review_ns > now { "within " (words::span((setting.review_ns - now) as f64 * 1e-9)) }
                @else { "due" }
                span .aside { "good for followers until " (words::stamp(setting.expiry_ns)) }
            }
            None => "\u{2014}",
        }
    };
    let made = html! {
        (status.settings_made) span .aside { (status.changes_made) " of them changed what is run" }
    };
    words::facts(
        "figures",
        [
            ("Target, 95 %", target),
            ("Runs", crossings::runs(status.setting.as_ref())),
            ("Residual", residual),
            ("Phase error, 95 %", phase),
            ("If left alone", alone),
            ("Can be vouched for", vouched),
            ("Looked at again", review),
            ("Settings so far", made),
        ],
    )
}

fn phase(
    board: &Board,
    view: &CrossingView,
    forecast: Option<&PhaseForecast>,
    span: Span,
    now: HouseNs,
) -> Markup {
    let points = board.phase_history(&view.declaration.id, span, now);
    let headroom = view.declaration.headroom_samples;
    let drawn = figures::phase(
        &points,
        forecast,
        headroom,
        &happened(board, view, now),
        (span, now),
    );
    html! {
        section #phase aria-labelledby="phase-head" {
            h2 #phase-head { "Phase error" }
            (AskedSpan::choice(span))
            (figures::course("phase-picture", &drawn))
        }
    }
}

fn choice(view: &CrossingView) -> Markup {
    let Some(setting) = &view.status.setting else {
        return html! {};
    };
    html! {
        section #choice aria-labelledby="choice-head" {
            h2 #choice-head { "Why this ratio" }
            (fractions::explained(&setting_to_wire(setting), Some(&view.declaration.bounds)))
        }
    }
}

fn history(view: &CrossingView, recorded: &[Recorded], now: HouseNs) -> Markup {
    let id = &view.declaration.id;
    html! {
        section #settings aria-labelledby="settings-head" {
            h2 #settings-head { "Settings" }
            (settings::table(id, recorded, now))
            p { a href={ "/crossings/" (id) "/settings" } { "All settings of this crossing" } }
        }
    }
}

fn declared(declared: &CrossingDeclaration) -> Markup {
    let bounds = &declared.bounds;
    let bound = html! {
        "L up to " (bounds.max_l()) ", M up to " (bounds.max_m())
        @if let Some(prime) = bounds.largest_prime() { ", no prime factor above " (prime) }
    };
    let group = html! {
        @match &declared.group { Some(group) => (group), None => "none" }
    };
    html! {
        section #declared aria-labelledby="declared-head" {
            h2 #declared-head { "As declared" }
            (words::facts("declaration", [
                ("Bounds", bound),
                ("Headroom", html! { "\u{b1}" (declared.headroom_samples) " sink samples" }),
                ("The resampler", html! { (realisation(declared.realisation)) }),
                ("Group", group),
                ("From decision to effect", html! { (words::seconds(declared.lead_ns as f64 * 1e-9)) }),
                ("Looked at again at least every", html! { (words::span(declared.review_horizon_ns as f64 * 1e-9)) }),
            ]))
        }
    }
}

fn realisation(realisation: Realisation) -> &'static str {
    match realisation {
        Realisation::Single => "runs one ratio until it is told another",
        Realisation::Cadence => "takes two ratios in turn by itself",
        Realisation::Stepping => "steps through one table of phases by itself",
        Realisation::Lazy => "holds each of two ratios as long as it can by itself",
    }
}

fn happened(board: &Board, view: &CrossingView, now: HouseNs) -> Vec<crate::chronicle::Happening> {
    changes::lately_of(board, now, |h| h.crossing() == Some(&view.declaration.id))
}
