//! The facility at a glance, worst first.

use std::sync::Arc;

use axum::extract::State;
use maud::{Markup, html};
use ratewright_pictures::Nearness;

use super::{
    Sources, attention, changes, clocks, crossings,
    frame::{Leaf, Place},
    listing, words,
};
use crate::board::{ClockView, CrossingView};

/// Rows of each table; the lists have all.
const ROWS: usize = 12;
/// Changes that are told.
const CHANGES: usize = 8;

pub(super) async fn show(State(sources): State<Sources>) -> Leaf {
    let now = sources.house.now();
    let crossings = listing::sorted_crossings(&sources.board);
    let clocks = listing::sorted_clocks(&sources.board);
    let headline = attention::headline(&crossings, &clocks);
    let lately = changes::lately(&sources.board, now, CHANGES);
    let body = html! {
        h1 #headline aria-live="polite" { (words::sentence(&headline)) }
        (tally(&crossings, &clocks))
        (listing::search("/crossings", "", "Find a crossing or one of its clocks"))
        section #look aria-labelledby="look-head" {
            h2 #look-head { "Needs a look" }
            (attention::list(&crossings, &clocks, now))
        }
        section #ahead aria-labelledby="ahead-head" {
            h2 #ahead-head { "What is ahead" }
            (nearness(&crossings))
        }
        section #changed aria-labelledby="changed-head" {
            h2 #changed-head { "Changed in the last hour" }
            (changes::list(&lately.0, now))
            (changes::more(lately.1, lately.0.len()))
        }
        section #crossings aria-labelledby="crossings-head" {
            h2 #crossings-head { "Crossings" }
            (crossings::table(&crossings[..crossings.len().min(ROWS)]))
            (rest(crossings.len(), "/crossings", "crossings"))
        }
        section #clocks aria-labelledby="clocks-head" {
            h2 #clocks-head { "Clocks" }
            (clocks::table(&clocks[..clocks.len().min(ROWS)], now))
            (rest(clocks.len(), "/clocks", "clocks"))
        }
    };
    Leaf {
        title: headline,
        place: Place::Facility,
        as_of_ns: Some(now),
        body,
    }
}

/// How many are in which state; each count leads to those it counts.
fn tally(crossings: &[Arc<CrossingView>], clocks: &[Arc<ClockView>]) -> Markup {
    let of_crossings = words::CROSSING_STATES.map(|state| {
        let count = crossings.iter().filter(|v| v.status.state == state).count();
        let (word, class) = words::crossing_state(state);
        (count, word, class)
    });
    let of_clocks = words::CLOCK_STATES.map(|state| {
        let count = clocks
            .iter()
            .filter(|v| !v.declaration.exact && v.estimate.estimate.state == state)
            .count();
        let (word, class) = words::clock_state(state);
        (count, word, class)
    });
    let row = |name: &str, counts: [(usize, &str, &str); 4]| {
        html! {
            div {
                dt { (words::sentence(name)) }
                @for (count, word, class) in counts.into_iter().filter(|(count, ..)| *count > 0) {
                    dd .(class) {
                        a .state href={ "/" (name) "?state=" (word.replace(' ', "-")) } { (count) " " (word) }
                    }
                }
            }
        }
    };
    html! {
        dl #tally .tally { (row("crossings", of_crossings)) (row("clocks", of_clocks)) }
    }
}

fn rest(all: usize, address: &str, what: &str) -> Markup {
    html! {
        @if all > ROWS {
            p { a href=(address) { "All " (all) " " (what) } ", the worst first." }
        }
    }
}

fn nearness(crossings: &[Arc<CrossingView>]) -> Markup {
    if crossings.is_empty() {
        return html! { p .calm { "No crossing is declared." } };
    }
    let marks: Vec<Nearness> = crossings.iter().map(|view| near(view)).collect();
    html! {
        p .note {
            "Each mark is a crossing: the farther to the left and the higher up, the nearer to a slip. \
             One that holds gets another setting before it comes to that."
        }
        (words::picture("nearness", &Nearness::draw(&marks)))
    }
}

fn near(view: &CrossingView) -> Nearness {
    let status = &view.status;
    let reach = status.phase_error_samples.abs() + 1.96 * status.phase_deviation_samples;
    Nearness {
        name: crossings::title(view).to_owned(),
        standing: words::crossing_standing(status.state),
        seconds_to_slip: status.seconds_to_slip,
        used: reach / view.declaration.headroom_samples,
    }
}
