//! The settings of a crossing: all of them, and why each was made.

use axum::{
    extract::{Path, Query, State},
    http::StatusCode,
    response::{IntoResponse, Response},
};
use maud::{Markup, html};
use ratewright_control::{HouseNs, Id};
use ratewright_proto::v1::{self, SettingReason, setting::Realisation};
use serde::Deserialize;

use super::{
    Sources, fractions,
    frame::{self, Leaf, Place},
    words,
};
use crate::store::{Recorded, StoreError};

/// Settings on a page.
const ROWS: usize = 50;

/// Where a page of the history begins.
#[derive(Debug, Default, Deserialize)]
#[serde(default)]
pub(super) struct Asked {
    /// `{epoch}-{number}`: only settings before this one; empty for the newest.
    before: String,
}

pub(super) async fn list(
    State(sources): State<Sources>,
    Path(name): Path<String>,
    Query(asked): Query<Asked>,
) -> Response {
    let Ok(id) = Id::new(&name) else {
        return frame::not_found("No crossing has such a name.");
    };
    let before = match asked.before.as_str() {
        "" => None,
        text => match numbers(text) {
            Some(numbers) => Some(numbers),
            None => {
                let why = "before: accepted is {epoch}-{number} of a setting, such as 1-20.";
                return frame::trouble(
                    StatusCode::BAD_REQUEST,
                    "No such place in the history",
                    why,
                );
            }
        },
    };
    let mut recorded = match sources.history.settings(id.clone(), before, ROWS + 1).await {
        Ok(recorded) => recorded,
        Err(fault) => return unreadable(&fault),
    };
    if recorded.is_empty() && sources.board.crossing(&id).is_none() {
        return frame::not_found("No crossing of this name was ever declared.");
    }
    let more = recorded.len() > ROWS;
    recorded.truncate(ROWS);
    let now = sources.house.now();
    let body = html! {
        p .kind { "Crossing " a href={ "/crossings/" (id) } { (id) } }
        h1 #headline { "Settings, newest first" }
        (table(&id, &recorded, now))
        nav #pages .choice aria-label="Pages" {
            @if before.is_some() { a href={ "/crossings/" (id) "/settings" } { "newest" } }
            @if let Some(last) = recorded.last().filter(|_| more) {
                a rel="next" href={ "?before=" (last.setting.epoch) "-" (last.setting.number) } { "older" }
            }
        }
    };
    Leaf {
        title: format!("settings of {id}"),
        place: Place::Crossings,
        as_of_ns: None,
        body,
    }
    .into_response()
}

pub(super) async fn show(
    State(sources): State<Sources>,
    Path((name, numbered)): Path<(String, String)>,
) -> Response {
    let none = || frame::not_found("There never was such a setting.");
    let (Ok(id), Some(numbers)) = (Id::new(&name), numbers(&numbered)) else {
        return none();
    };
    let recorded = match sources.history.setting(id.clone(), Some(numbers)).await {
        Ok(Some(recorded)) => recorded,
        Ok(None) => return none(),
        Err(fault) => return unreadable(&fault),
    };
    let view = sources.board.crossing(&id);
    let bounds = view.map(|view| view.declaration.bounds);
    let setting = &recorded.setting;
    let body = html! {
        p .kind { "Crossing " a href={ "/crossings/" (id) } { (id) } }
        h1 #headline { "Setting " (setting.epoch) "-" (setting.number) }
        p #state .verdict { (words::sentence(why(setting))) "." }
        section #explanation aria-labelledby="explanation-head" {
            h2 #explanation-head { "In words" }
            @for line in &recorded.explanation { p { (line) } }
        }
        section #choice aria-labelledby="choice-head" {
            h2 #choice-head { "Why this ratio" }
            (fractions::explained(setting, bounds.as_ref()))
        }
        (times(setting))
        nav #neighbours .choice aria-label="Other settings" {
            @if setting.number > 1 {
                a rel="prev" href={ "/crossings/" (id) "/settings?before=" (setting.epoch) "-" (setting.number) } {
                    "those before it"
                }
            }
            a href={ "/crossings/" (id) "/settings" } { "all settings" }
        }
    };
    Leaf {
        title: format!("setting {numbered} of {id}"),
        place: Place::Crossings,
        as_of_ns: None,
        body,
    }
    .into_response()
}

fn times(setting: &v1::Setting) -> Markup {
    let at = |house_ns: HouseNs| html! { (words::stamp(house_ns)) };
    html! {
        section #times aria-labelledby="times-head" {
            h2 #times-head { "When" }
            (words::facts("instants", [
                ("Decided", at(setting.decided_ns)),
                ("In effect from", at(setting.effect_ns)),
                ("To be looked at by", at(setting.review_ns)),
                ("Good until", at(setting.expiry_ns)),
            ]))
        }
    }
}

pub(super) fn table(id: &Id, recorded: &[Recorded], now: HouseNs) -> Markup {
    html! {
        table role="table" {
            caption { "The residual is what each was off by when it was decided." }
            thead role="rowgroup" {
                tr role="row" {
                    th role="columnheader" scope="col" { "Setting" }
                    th role="columnheader" scope="col" { "Decided" }
                    th role="columnheader" scope="col" { "Runs" }
                    th role="columnheader" scope="col" .number { "Residual, ppb" }
                    th role="columnheader" scope="col" { "Because" }
                }
            }
            tbody role="rowgroup" {
                @for Recorded { setting, .. } in recorded {
                    @let numbered = format!("{}-{}", setting.epoch, setting.number);
                    tr id={ "setting-" (numbered) } role="row" .sound[setting.reason() != SettingReason::Renewal] {
                        th role="rowheader" scope="row" {
                            a href={ "/crossings/" (id) "/settings/" (numbered) } { (numbered) }
                        }
                        td role="cell" data-head="Decided" { (words::ago(setting.decided_ns, now)) }
                        td role="cell" data-head="Runs" .ratio { (runs(setting)) }
                        td role="cell" data-head="Residual, ppb" .number { (words::ppb(setting.residual)) }
                        td role="cell" data-head="Because" { (why(setting)) }
                    }
                }
            }
        }
    }
}

fn runs(setting: &v1::Setting) -> String {
    let ratio =
        |ratio: Option<v1::Ratio>| ratio.map_or(String::new(), |r| format!("{}/{}", r.l, r.m));
    match &setting.realisation {
        Some(Realisation::Single(single)) => ratio(Some(*single)),
        Some(Realisation::Cadence(cadence)) => {
            let blocks = |count: u64, of| format!("{count}\u{a0}\u{d7}\u{a0}{}", ratio(of));
            let (low, high) = (
                blocks(cadence.low_blocks, cadence.low),
                blocks(cadence.high_blocks, cadence.high),
            );
            format!("{low} and {high}")
        }
        Some(Realisation::Stepping(stepping)) => format!(
            "{} or {} of {} phases",
            stepping.advance, stepping.longer_advance, stepping.phases
        ),
        Some(Realisation::Lazy(lazy)) => {
            let cadence = lazy.cadence.unwrap_or_default();
            format!(
                "{} and {}, each held",
                ratio(cadence.low),
                ratio(cadence.high)
            )
        }
        None => "\u{2014}".to_owned(),
    }
}

fn why(setting: &v1::Setting) -> &'static str {
    use ratewright_control::Reason;
    match setting.reason() {
        SettingReason::Unspecified => "no reason was written down",
        SettingReason::First => words::why(Reason::First),
        SettingReason::Evidence => words::why(Reason::Evidence),
        SettingReason::Recovery => words::why(Reason::Recovery),
        SettingReason::Declaration => words::why(Reason::Declaration),
        SettingReason::Group => words::why(Reason::Group),
        SettingReason::ChangeOver => words::why(Reason::ChangeOver),
        SettingReason::Renewal => words::why(Reason::Renewal),
    }
}

/// `{epoch}-{number}`.
fn numbers(text: &str) -> Option<(u64, u64)> {
    let (epoch, number) = text.split_once('-')?;
    Some((epoch.parse().ok()?, number.parse().ok()?))
}

/// The store failed.
pub(super) fn unreadable(fault: &StoreError) -> Response {
    tracing::error!(%fault, "the history could not be read");
    let why = "The history of settings could not be read; the log tells why.";
    frame::trouble(StatusCode::INTERNAL_SERVER_ERROR, "The store failed", why)
}
