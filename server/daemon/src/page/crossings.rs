//! The table of crossings.

use std::sync::Arc;

use maud::{Markup, html};
use ratewright_control::{CrossingState, CrossingStatus, Id, Setting};

use super::words;
use crate::board::CrossingView;

/// Orders crossings with the worst first. Times to slip count by their order of magnitude, so that rows
/// do not change places at every look.
pub(super) fn urgency(view: &CrossingView) -> (u8, u32, Id) {
    let rank = match view.status.state {
        CrossingState::OutOfBounds => 0,
        CrossingState::Degraded => 1,
        CrossingState::Waiting => 2,
        // It gets no other setting in time.
        CrossingState::Holding if view.status.pin.is_some() => 2,
        CrossingState::Holding => 3,
    };
    let slip = view
        .status
        .seconds_to_slip
        .map_or(u32::MAX, |s| (s.max(1.0) as u64).ilog2());
    (rank, slip, view.declaration.id.clone())
}

/// What to call a crossing: its title, or else its id.
pub(super) fn title(view: &CrossingView) -> &str {
    match view.declaration.display_name.as_str() {
        "" => view.declaration.id.as_str(),
        title => title,
    }
}

/// A crossing's title that leads to its page.
pub(super) fn link(view: &CrossingView) -> Markup {
    html! { a href={ "/crossings/" (view.declaration.id) } { (title(view)) } }
}

pub(super) fn table(views: &[Arc<CrossingView>]) -> Markup {
    html! {
        table role="table" {
            caption {
                "The worst first: by state, then by the time to a slip if left alone. The residual is what runs over what it should be, minus one, in \
                 parts per billion. The phase error is in samples of the sink; it slips when it leaves the \
                 headroom, which the line shows from end to end, and the last column says when that would be if \
                 nothing were set anew."
            }
            thead role="rowgroup" {
                tr role="row" {
                    th role="columnheader" scope="col" { "Crossing" }
                    th role="columnheader" scope="col" { "State" }
                    th role="columnheader" scope="col" { "Runs" }
                    th role="columnheader" scope="col" .number { "Residual, ppb" }
                    th role="columnheader" scope="col" { "Phase error in its headroom" }
                    th role="columnheader" scope="col" { "If left alone" }
                }
            }
            tbody role="rowgroup" {
                @for view in views { (row(view)) }
            }
        }
    }
}

fn row(view: &CrossingView) -> Markup {
    let (declaration, status) = (&view.declaration, &view.status);
    let (state, class) = words::crossing_state(status.state);
    html! {
        tr id={ "crossing-" (view.declaration.id) } role="row" .(class) {
            th role="rowheader" scope="row" {
                (link(view))
                span .aside { (declaration.source) " \u{2192} " (declaration.sink) }
            }
            td role="cell" data-head="State" {
                span .state { (state) }
                // What holds needs no reasons.
                @if status.state != CrossingState::Holding { span .aside { (status.reason) } }
                @if let Some(pin) = &status.pin { span .aside { "pinned by " (pin.by) } }
            }
            td role="cell" data-head="Runs" { (runs(status.setting.as_ref())) }
            td role="cell" data-head="Residual, ppb" .number {
                @match status.residual {
                    Some(residual) => (words::ppb(residual)),
                    None => "\u{2014}",
                }
            }
            td role="cell" data-head="Phase error" {
                (gauge(status, declaration.headroom_samples))
                span .figure {
                    (words::samples(status.phase_error_samples))
                    span .aside .inline { " of \u{b1}" (declaration.headroom_samples) }
                }
            }
            td role="cell" data-head="If left alone" .span {
                @match status.seconds_to_slip {
                    Some(seconds) => { "slips in " (words::span(seconds)) }
                    None => "no slip in sight",
                }
            }
        }
    }
}

/// What a setting runs, with the way to the setting.
pub(super) fn runs(setting: Option<&Setting>) -> Markup {
    html! {
        @match setting {
            Some(setting) => {
                span .ratio { (words::runs(&setting.realised)) }
                span .aside {
                    a href={ "/crossings/" (setting.crossing) "/settings/" (setting.epoch) "-" (setting.number) } {
                        "setting " (setting.epoch) "-" (setting.number)
                    }
                    ": " (words::why(setting.reason))
                }
            }
            None => "nothing yet",
        }
    }
}

/// Half the width of the drawing, and half its height, in its own units.
const HALF_WIDTH: f64 = 60.0;
const MIDDLE: f64 = 7.0;

/// The headroom from end to end as a line with its centre marked; on it the 95 % band of the phase error
/// and the phase error itself. The figures beside it say the same, so readers skip it.
fn gauge(status: &CrossingStatus, headroom_samples: f64) -> Markup {
    let at = |samples: f64| HALF_WIDTH * (samples / headroom_samples).clamp(-1.0, 1.0);
    let spread = 1.96 * status.phase_deviation_samples;
    let (low, high) = (
        at(status.phase_error_samples - spread),
        at(status.phase_error_samples + spread),
    );
    let point = at(status.phase_error_samples);
    let two = |x: f64| format!("{x:.2}");
    html! {
        svg .gauge viewBox="-64 0 128 14" aria-hidden="true" focusable="false" {
            path .track d={ "M" (-HALF_WIDTH) " 2V12M" (HALF_WIDTH) " 2V12M0 4V10M" (-HALF_WIDTH) " 7H" (HALF_WIDTH) } {}
            rect .band x=(two(low)) y="4" width=(two((high - low).max(1.0))) height="6" {}
            path .point d={ "M" (two(point)) " " (MIDDLE) "m-3.5 0l3.5 -5l3.5 5l-3.5 5z" } {}
        }
    }
}
