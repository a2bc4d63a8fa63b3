//! What changed lately, in sentences.

use axum::extract::State;
use maud::{Markup, html};
use ratewright_control::{HouseNs, Id, Transition};

use super::{
    Sources,
    frame::{Leaf, Place},
    hand, words,
};
use crate::{
    board::Board,
    chronicle::{Happening, What},
    convert::hand::act_to_wire,
};

/// How far back "lately" goes: an hour.
const LATELY_NS: HouseNs = 3_600_000_000_000;
/// Changes on a page of their own.
const SHOWN: usize = 500;

pub(super) async fn show(State(sources): State<Sources>) -> Leaf {
    let now = sources.house.now();
    let (happenings, all) = lately(&sources.board, now, SHOWN);
    let body = html! {
        h1 #headline { "Changed in the last hour" }
        @if all > happenings.len() { p { "The newest " (happenings.len()) " of " (all) "." } }
        (list(&happenings, now))
    };
    Leaf {
        title: "changed in the last hour".to_owned(),
        place: Place::Elsewhere,
        as_of_ns: Some(now),
        body,
    }
}

/// The newest changes of the last hour, at most `most`, and how many there are.
pub(super) fn lately(board: &Board, now_ns: HouseNs, most: usize) -> (Vec<Happening>, usize) {
    board.happenings(now_ns - LATELY_NS, most, |_| true)
}

/// The same of what is about a clock or a crossing.
pub(super) fn lately_of(
    board: &Board,
    now_ns: HouseNs,
    wanted: impl Fn(&Happening) -> bool,
) -> Vec<Happening> {
    board.happenings(now_ns - LATELY_NS, 20, wanted).0
}

pub(super) fn list(happenings: &[Happening], now_ns: HouseNs) -> Markup {
    html! {
        @if happenings.is_empty() {
            p .calm { "Nothing changed in the last hour, as far back as the daemon's start." }
        } @else {
            ol .changes {
                @for happening in happenings {
                    li { time { (words::ago(happening.at_ns, now_ns)) } " " span { (told(&happening.what)) } }
                }
            }
        }
    }
}

/// What is not in a list of `shown` of `all`.
pub(super) fn more(all: usize, shown: usize) -> Markup {
    html! {
        @if all > shown { p { a href="/changes" { "All " (all) " changes of the last hour" } } }
    }
}

fn told(what: &What) -> Markup {
    match what {
        What::Transition(Transition::Clock {
            clock,
            from,
            to,
            reason,
        }) => {
            let (from, (to, class)) = (words::clock_state(*from).0, words::clock_state(*to));
            html! {
                "clock " (link("clocks", clock)) ": " (from) " \u{2192} " span .state.(class) { (to) }
                ", " (words::why_state(*reason))
            }
        }
        What::Transition(Transition::ClockFault { clock, fault }) => html! {
            "clock " (link("clocks", clock)) ": "
            @match fault {
                Some(fault) => { span .state.adrift { "at fault" } ", " (fault) }
                None => "its fault is gone",
            }
        },
        What::Transition(Transition::Crossing {
            crossing,
            from,
            to,
            reason,
        }) => {
            let (from, (to, class)) = (words::crossing_state(*from).0, words::crossing_state(*to));
            html! {
                "crossing " (link("crossings", crossing)) ": " (from) " \u{2192} "
                span .state.(class) { (to) } ", " (reason)
            }
        }
        What::Transition(Transition::Centred {
            crossing,
            phase_error_samples,
            reason,
        }) => html! {
            "crossing " (link("crossings", crossing)) ": centred anew at "
            (words::samples(*phase_error_samples)) " samples, " (reason)
        },
        What::Act(act) => html! {
            "crossing " (link("crossings", &act.crossing)) ": " (hand::told(&act_to_wire(act)))
        },
        What::Setting {
            crossing,
            numbered: (epoch, number),
            reason,
        } => html! {
            "crossing " (link("crossings", crossing)) ": "
            a href={ "/crossings/" (crossing) "/settings/" (epoch) "-" (number) } {
                "setting " (epoch) "-" (number)
            }
            ", because " (words::why(*reason))
        },
    }
}

fn link(of: &str, id: &Id) -> Markup {
    html! { a href={ "/" (of) "/" (id) } { (id) } }
}
