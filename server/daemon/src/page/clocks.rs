//! The table of clocks.

use std::{cmp::Reverse, sync::Arc};

use maud::{Markup, html};
use ratewright_control::{HouseNs, Id, Reference};
use ratewright_timing::State;

use super::words;
use crate::board::ClockView;

const NS_PER_S: f64 = 1e9;

/// Orders clocks with the worst first.
pub(super) fn urgency(view: &ClockView) -> (u8, Id) {
    let rank = match view.estimate.estimate.state {
        State::FreeRunning => 0,
        State::Holdover => 1,
        State::Acquiring => 2,
        State::Locked if view.declaration.exact => 4,
        State::Locked => 3,
    };
    (rank, view.declaration.id.clone())
}

/// What to call a clock: its title, or else its id.
pub(super) fn title(view: &ClockView) -> &str {
    match view.declaration.display_name.as_str() {
        "" => view.declaration.id.as_str(),
        title => title,
    }
}

/// A clock's title that leads to its page.
pub(super) fn link(view: &ClockView) -> Markup {
    html! { a href={ "/clocks/" (view.declaration.id) } { (title(view)) } }
}

/// Seconds since the newest reading; `None` without one.
pub(super) fn reading_age_s(view: &ClockView, house_ns: HouseNs) -> Option<f64> {
    let last_ns = view.estimate.estimate.last_reading_ns?;
    Some((house_ns - last_ns).max(0) as f64 / NS_PER_S)
}

pub(super) fn table(views: &[Arc<ClockView>], house_ns: HouseNs) -> Markup {
    html! {
        table role="table" {
            caption {
                "The least known first. Drift is against house time, in parts per million, with the \
                 half-width of its 95\u{a0}% interval; positive runs fast."
            }
            thead role="rowgroup" {
                tr role="row" {
                    th role="columnheader" scope="col" { "Clock" }
                    th role="columnheader" scope="col" { "State" }
                    th role="columnheader" scope="col" .number { "Drift, ppm" }
                    th role="columnheader" scope="col" { "Lock" }
                    th role="columnheader" scope="col" { "Last reading" }
                }
            }
            tbody role="rowgroup" {
                @for view in views { (row(view, house_ns)) }
            }
        }
    }
}

fn row(view: &ClockView, house_ns: HouseNs) -> Markup {
    let estimate = &view.estimate.estimate;
    let (state, class) = words::clock_state(estimate.state);
    html! {
        tr id={ "clock-" (view.declaration.id) } role="row" .(class) {
            th role="rowheader" scope="row" {
                (link(view))
                span .aside { (view.declaration.id) " \u{b7} " (words::rate(view.declaration.nominal_hz)) }
            }
            td role="cell" data-head="State" { span .state { (state) } }
            td role="cell" data-head="Drift, ppm" .number {
                @if view.declaration.exact {
                    "0 by definition"
                } @else if view.estimate.measured {
                    (words::ppm(estimate.drift)) span .aside { "\u{b1} " (words::half_width_ppm(estimate.half_width())) }
                } @else {
                    "not measured"
                }
            }
            td role="cell" data-head="Lock" { (lock(view)) }
            td role="cell" data-head="Last reading" { (last_reading(view, house_ns)) }
        }
    }
}

fn lock(view: &ClockView) -> String {
    let estimate = &view.estimate.estimate;
    match (estimate.state, estimate.lock_expected_in_s) {
        (State::Locked, _) => "\u{2014}".to_owned(),
        (_, Some(seconds)) => format!("in about {}", words::span(seconds)),
        (State::Holdover, None) => "when readings return".to_owned(),
        (_, None) => "cannot be foreseen yet".to_owned(),
    }
}

fn last_reading(view: &ClockView, house_ns: HouseNs) -> Markup {
    let by = match (&view.estimate.reference, &view.estimate.probe) {
        (Some(Reference::Clock(host)), _) => format!("against {host}"),
        (Some(Reference::House), Some(probe)) => format!("against house time, by {probe}"),
        (Some(Reference::House), None) => "against house time".to_owned(),
        (None, _) => String::new(),
    };
    html! {
        @match reading_age_s(view, house_ns) {
            Some(age_s) => { (words::span(age_s)) " ago" span .aside { (by) } }
            None => "\u{2014}",
        }
    }
}

/// The order of readings' age, oldest first, for the list of what needs a look.
pub(super) fn staleness(view: &ClockView, house_ns: HouseNs) -> Reverse<u64> {
    Reverse(reading_age_s(view, house_ns).unwrap_or(f64::MAX) as u64)
}
