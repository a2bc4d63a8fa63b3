//! All crossings and all clocks, to be searched and leafed through, the worst first.

use std::sync::Arc;

use axum::{
    extract::{Query, State},
    http::StatusCode,
    response::{IntoResponse, Response},
};
use maud::{Markup, html};
use serde::Deserialize;

use super::{
    Sources, clocks, crossings,
    frame::{self, Leaf, Place},
    words,
};
use crate::board::{Board, ClockView, CrossingView};

/// Rows on a page.
const ROWS: usize = 50;
/// Longest text that is searched for, bytes.
const LONGEST: usize = 128;

/// What is asked for.
#[derive(Clone, Debug, Default, Deserialize)]
#[serde(default)]
pub(super) struct Asked {
    /// Part of a name or a title.
    q: String,
    /// State, its words joined by `-`; empty for any.
    state: String,
    /// Page, from 1; empty for the first.
    page: String,
}

pub(super) fn sorted_crossings(board: &Board) -> Vec<Arc<CrossingView>> {
    let mut views = board.crossings(None, usize::MAX);
    views.sort_by_cached_key(|view| crossings::urgency(view));
    views
}

pub(super) fn sorted_clocks(board: &Board) -> Vec<Arc<ClockView>> {
    let mut views = board.clocks(None, usize::MAX);
    views.sort_by_cached_key(|view| clocks::urgency(view));
    views
}

pub(super) async fn crossings(
    State(sources): State<Sources>,
    Query(asked): Query<Asked>,
) -> Response {
    let states = words::CROSSING_STATES.map(|state| words::crossing_state(state).0);
    let found = match asked.among(sorted_crossings(&sources.board), &states, |view| {
        let declared = &view.declaration;
        let names = [
            declared.id.as_str(),
            &declared.display_name,
            declared.source.as_str(),
            declared.sink.as_str(),
        ];
        (words::crossing_state(view.status.state).0, names)
    }) {
        Ok(found) => found,
        Err(fault) => return fault.into_response(),
    };
    let list = List {
        address: "/crossings",
        name: "crossings",
        states: &states,
        asked: &asked,
    };
    let body = list.body(&found, crossings::table(&found.rows));
    leaf(&sources, Place::Crossings, &list, body)
}

pub(super) async fn clocks(State(sources): State<Sources>, Query(asked): Query<Asked>) -> Response {
    let now = sources.house.now();
    let states = words::CLOCK_STATES.map(|state| words::clock_state(state).0);
    let found = match asked.among(sorted_clocks(&sources.board), &states, |view| {
        let names = [view.declaration.id.as_str(), &view.declaration.display_name];
        (words::clock_state(view.estimate.estimate.state).0, names)
    }) {
        Ok(found) => found,
        Err(fault) => return fault.into_response(),
    };
    let list = List {
        address: "/clocks",
        name: "clocks",
        states: &states,
        asked: &asked,
    };
    let body = list.body(&found, clocks::table(&found.rows, now));
    leaf(&sources, Place::Clocks, &list, body)
}

fn leaf(sources: &Sources, place: Place, list: &List<'_>, body: Markup) -> Response {
    Leaf {
        title: list.name.to_owned(),
        place,
        as_of_ns: Some(sources.house.now()),
        body,
    }
    .into_response()
}

/// What is asked for is not as accepted.
struct Fault(String);

impl IntoResponse for Fault {
    fn into_response(self) -> Response {
        frame::trouble(
            StatusCode::BAD_REQUEST,
            "That cannot be searched for",
            &self.0,
        )
    }
}

/// A page of what was found.
struct Found<V> {
    rows: Vec<Arc<V>>,
    /// Of all its pages.
    count: usize,
    /// From 1.
    page: usize,
}

impl Asked {
    /// The page that is asked for; `facts` gives a view's state and what it is found by.
    fn among<V, const N: usize>(
        &self,
        views: Vec<Arc<V>>,
        states: &[&str],
        facts: impl Fn(&V) -> (&'static str, [&str; N]),
    ) -> Result<Found<V>, Fault> {
        let state = self.state.replace('-', " ");
        if !state.is_empty() && !states.contains(&state.as_str()) {
            let accepted: Vec<String> = states.iter().map(|s| s.replace(' ', "-")).collect();
            return Err(fault("state", &self.state, &accepted.join(", ")));
        }
        if self.q.len() > LONGEST {
            return Err(fault(
                "q",
                &format!("{} bytes long", self.q.len()),
                "at most 128 bytes",
            ));
        }
        let wanted = self.q.trim().to_lowercase();
        let is_wanted = |view: &Arc<V>| {
            let (its_state, names) = facts(view);
            (state.is_empty() || its_state == state)
                && (wanted.is_empty()
                    || names
                        .iter()
                        .any(|name| name.to_lowercase().contains(&wanted)))
        };
        let found: Vec<Arc<V>> = views.into_iter().filter(is_wanted).collect();
        let pages = found.len().div_ceil(ROWS).max(1);
        let page = match self.page.as_str() {
            "" => 1,
            text => match text.parse::<usize>() {
                // What was there a moment ago may be gone: the last page is the nearest.
                Ok(page) if page > 0 => page.min(pages),
                _ => return Err(fault("page", text, "a number from 1 on")),
            },
        };
        let count = found.len();
        let rows = found
            .into_iter()
            .skip((page - 1) * ROWS)
            .take(ROWS)
            .collect();
        Ok(Found { rows, count, page })
    }

    fn address(&self, of: &str, page: usize) -> String {
        let parts = [("q", self.q.trim()), ("state", &self.state)];
        let asked = parts.iter().filter(|(_, value)| !value.is_empty());
        let asked = asked.map(|(name, value)| format!("{name}={}&", words::in_address(value)));
        format!("{of}?{}page={page}", asked.collect::<String>())
    }
}

fn fault(field: &str, value: &str, accepted: &str) -> Fault {
    let value: String = value.chars().take(64).collect();
    Fault(format!("{field} is {value}: accepted is {accepted}."))
}

struct List<'a> {
    address: &'a str,
    name: &'a str,
    states: &'a [&'a str],
    asked: &'a Asked,
}

impl List<'_> {
    fn body<V>(&self, found: &Found<V>, table: Markup) -> Markup {
        let Found { rows, count, page } = found;
        let first = (page - 1) * ROWS + 1;
        html! {
            h1 #headline { (words::sentence(self.name)) }
            (search(self.address, &self.asked.q, "Part of a name"))
            (self.states())
            p #found {
                @if rows.is_empty() {
                    "None of the " (self.name) " is so."
                } @else {
                    (first) " to " (first + rows.len() - 1) " of " (count) ", the worst first."
                }
            }
            @if !rows.is_empty() { (table) }
            (self.pages(*count, *page))
        }
    }

    fn states(&self) -> Markup {
        let state = |value: String, name: &str| {
            let asked = Asked {
                q: self.asked.q.clone(),
                state: value.clone(),
                page: String::new(),
            };
            let is_this = (value == self.asked.state).then_some("true");
            html! { a href=(asked.address(self.address, 1)) aria-current=[is_this] { (name) } }
        };
        html! {
            nav #states .choice aria-label="State" {
                (state(String::new(), "any state"))
                @for name in self.states { (state(name.replace(' ', "-"), name)) }
            }
        }
    }

    fn pages(&self, count: usize, page: usize) -> Markup {
        let pages = count.div_ceil(ROWS).max(1);
        let to = |page: usize| self.asked.address(self.address, page);
        html! {
            @if pages > 1 {
                nav #pages .choice aria-label="Pages" {
                    @if page > 1 {
                        a href=(to(1)) { "first" } a rel="prev" href=(to(page - 1)) { "before" }
                    }
                    span { "page " (page) " of " (pages) }
                    @if page < pages {
                        a rel="next" href=(to(page + 1)) { "next" } a href=(to(pages)) { "last" }
                    }
                }
            }
        }
    }
}

/// A field to search by.
pub(super) fn search(address: &str, text: &str, label: &str) -> Markup {
    html! {
        form #search .search role="search" action=(address) method="get" {
            label for="q" { (label) }
            input #q name="q" type="search" value=(text) maxlength=(LONGEST) autocomplete="off";
            button type="submit" { "Search" }
        }
    }
}
