//! What needs a look, in sentences, worst first.

use std::sync::Arc;

use maud::{Markup, html};
use ratewright_control::{CrossingState, HouseNs};
use ratewright_timing::State;

use super::{clocks, crossings, words};
use crate::board::{ClockView, CrossingView};

/// Sentences shown; the tables have the rest.
const SENTENCES: usize = 8;

/// The state of the facility in one sentence.
pub(super) fn headline(crossings: &[Arc<CrossingView>], clocks: &[Arc<ClockView>]) -> String {
    if crossings.is_empty() && clocks.is_empty() {
        return "Nothing is declared yet.".to_owned();
    }
    let holding = crossings
        .iter()
        .filter(|v| v.status.state == CrossingState::Holding)
        .count();
    let measured: Vec<_> = clocks.iter().filter(|v| !v.declaration.exact).collect();
    let locked = measured
        .iter()
        .filter(|v| v.estimate.estimate.state == State::Locked)
        .count();
    let hold = format!(
        "{} holding",
        part(holding, crossings.len(), "crossing is", "crossings are")
    );
    if measured.is_empty() {
        return format!("{hold}.");
    }
    format!(
        "{hold}, {} locked.",
        part(locked, measured.len(), "clock is", "clocks are")
    )
}

fn part(some: usize, all: usize, one: &str, many: &str) -> String {
    match (some, all) {
        (0, _) => format!("no {one}"),
        (1, 1) => format!("the one {one}"),
        (some, all) if some == all => format!("all {all} {many}"),
        (some, all) => format!("{some} of {all} {many}"),
    }
}

pub(super) fn list(
    crossings: &[Arc<CrossingView>],
    clocks: &[Arc<ClockView>],
    house_ns: HouseNs,
) -> Markup {
    let mut lost: Vec<_> = clocks
        .iter()
        .filter(|v| v.estimate.estimate.state == State::Holdover)
        .collect();
    lost.sort_by_key(|view| clocks::staleness(view, house_ns));
    let at_fault = clocks.iter().filter_map(|view| fault(view));
    let troubles = crossings.iter().filter_map(|view| trouble(view));
    let lost = lost.into_iter().map(|view| holdover(view, house_ns));
    let unknown = clocks
        .iter()
        .filter(|v| v.estimate.estimate.state == State::FreeRunning);
    let unknown = unknown.map(|view| free_running(view));
    let sentences: Vec<Markup> = troubles
        .chain(at_fault)
        .chain(lost)
        .chain(unknown)
        .collect();
    let more = sentences.len().saturating_sub(SENTENCES);
    html! {
        @if sentences.is_empty() {
            p .calm { "Nothing needs a look." }
        } @else {
            ul .attention {
                @for sentence in sentences.iter().take(SENTENCES) { li { (sentence) } }
                @if more > 0 { li { "and " (more) " more: " a href="/crossings" { "crossings" } ", " a href="/clocks" { "clocks" } "." } }
            }
        }
    }
}

/// A crossing that holds will get its next setting in time: only the others are worth a sentence, and those
/// that get none because they are pinned.
fn trouble(view: &CrossingView) -> Option<Markup> {
    let status = &view.status;
    let pinned = status.pin.is_some() && status.seconds_to_slip.is_some();
    let problem = match status.state {
        CrossingState::OutOfBounds => "cannot be held within its bounds",
        CrossingState::Degraded => "cannot be vouched for",
        CrossingState::Waiting | CrossingState::Holding if pinned => "runs on as it is",
        CrossingState::Waiting | CrossingState::Holding => return None,
    };
    let beyond = status.phase_error_samples.abs() > view.declaration.headroom_samples;
    Some(html! {
        (crossings::link(view)) " " (problem)
        @if beyond { " and is beyond its headroom" }
        @else if let Some(seconds) = status.seconds_to_slip { " and may slip in " (words::span(seconds)) }
        ": " (status.reason) "."
        @if pinned { " It stays so until it is released." }
        @if let Some(needed) = &view.status.needed {
            " L up to " (needed.max_l()) " and M up to " (needed.max_m()) " would do."
        }
    })
}

fn fault(view: &ClockView) -> Option<Markup> {
    let fault = view.estimate.fault.as_ref()?;
    Some(html! { (clocks::link(view)) " is at fault: " (fault) "." })
}

fn holdover(view: &ClockView, house_ns: HouseNs) -> Markup {
    let age = clocks::reading_age_s(view, house_ns).map_or("ever".to_owned(), words::span);
    html! {
        (clocks::link(view)) " is in holdover: no readings for " (age) "."
    }
}

fn free_running(view: &ClockView) -> Markup {
    let told = match view.estimate.measured {
        true => "is measured, but known no better than 10 ppm yet.",
        false => "was never measured.",
    };
    html! { (clocks::link(view)) " " (told) }
}
