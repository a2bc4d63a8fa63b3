//! The probes that read a clock, and how good each of them is.

use maud::{Markup, html};
use ratewright_control::{HouseNs, LinkView, Reference};
use ratewright_timing::{Diagnosis, Event};

use super::words;

pub(super) fn table(links: &[LinkView], now: HouseNs) -> Markup {
    html! {
        table role="table" {
            caption {
                "The one the estimate rests on first. Worth: the deviation of a plain, normal reading that \
                 would tell as much as one of these. Set aside: readings far off what the noise allows."
            }
            thead role="rowgroup" {
                tr role="row" {
                    th role="columnheader" scope="col" { "Probe" }
                    th role="columnheader" scope="col" { "State" }
                    th role="columnheader" scope="col" .number { "Drift by it, ppm" }
                    th role="columnheader" scope="col" { "Noise" }
                    th role="columnheader" scope="col" .number { "Readings" }
                    th role="columnheader" scope="col" { "Found" }
                    th role="columnheader" scope="col" { "Last reading" }
                }
            }
            tbody role="rowgroup" {
                @for link in links { (row(link, now)) }
            }
        }
    }
}

fn row(link: &LinkView, now: HouseNs) -> Markup {
    let estimate = &link.estimate;
    let (state, class) = words::clock_state(estimate.state);
    html! {
        tr role="row" .(class) {
            th role="rowheader" scope="row" {
                (link.probe)
                span .aside { (against(&link.reference)) @if link.counts { ", counts" } }
            }
            td role="cell" data-head="State" {
                span .state { (state) }
                span .aside { (words::why_state(estimate.reason)) }
            }
            td role="cell" data-head="Drift by it, ppm" .number {
                (words::ppm(estimate.drift))
                span .aside { "\u{b1} " (words::half_width_ppm(estimate.half_width())) }
            }
            td role="cell" data-head="Noise" { (noise(&link.diagnosis)) }
            td role="cell" data-head="Readings" .number {
                (estimate.rows_used)
                span .aside { (estimate.outliers) " set aside" }
            }
            td role="cell" data-head="Found" { (found(link, now)) }
            td role="cell" data-head="Last reading" { (words::ago(link.arrived_ns, now)) }
        }
    }
}

fn against(reference: &Reference) -> Markup {
    match reference {
        Reference::House => html! { "against house time" },
        Reference::Clock(host) => html! { "against " a href={ "/clocks/" (host) } { (host) } },
    }
}

fn noise(diagnosis: &Diagnosis) -> Markup {
    if let Some(drift) = &diagnosis.drift_readings {
        let claim = match drift.deviation > 1.5 * drift.claimed {
            true => "claims",
            false => "as it claims:",
        };
        return html! {
            (words::half_width_ppm(drift.deviation)) " ppm a reading"
            span .aside { (claim) " " (words::half_width_ppm(drift.claimed)) " ppm" }
        };
    }
    let names = match diagnosis.directions.len() {
        0 => return html! { "not known yet" },
        1 => [""; 2],
        _ => ["out: ", "back: "],
    };
    html! {
        @for (direction, name) in diagnosis.directions.iter().zip(names) {
            span .line {
                (name) (words::seconds(direction.deviation_s)) ", worth " (words::seconds(direction.worth_s))
            }
            span .aside {
                (percent(direction.shares[1] + direction.shares[2])) " delayed, by "
                (words::seconds(tail_s(direction.shares, direction.tails_s))) " on average"
                @if direction.useless > 0.005 { "; " (percent(direction.useless)) " of no use" }
                @if direction.alike > 1.5 { "; " (format!("{:.0}", direction.alike)) " speak as one" }
                @if direction.burst > 0.5 { "; the path is in a burst of queueing" }
            }
        }
    }
}

/// Mean delay of the readings that are delayed.
fn tail_s(shares: [f64; 3], tails_s: [f64; 2]) -> f64 {
    let delayed = shares[1] + shares[2];
    let sum = shares[1] * tails_s[0] + shares[2] * tails_s[1];
    if delayed > 0.0 { sum / delayed } else { 0.0 }
}

fn percent(share: f64) -> String {
    format!("{:.0}\u{a0}%", share * 100.0)
}

fn found(link: &LinkView, now: HouseNs) -> Markup {
    let counts = [
        (link.events.phase_steps, "steps"),
        (link.events.route_changes, "changes of route"),
        (link.events.frequency_jumps, "jumps of the drift"),
        (link.events.restarts, "restarts"),
    ];
    let any: Vec<String> = counts
        .iter()
        .filter(|(count, _)| *count > 0)
        .map(|(count, name)| format!("{count} {name}"))
        .collect();
    html! {
        @if any.is_empty() { "nothing" } @else { (any.join(", ")) }
        @if let Some((event, at_ns)) = link.last_event {
            span .aside { "last " (event_word(event)) " " (words::ago(at_ns, now)) }
        }
    }
}

fn event_word(event: Event) -> &'static str {
    match event {
        Event::PhaseStep => "a step",
        Event::RouteChange => "a change of route",
        Event::FrequencyJump => "a jump of the drift",
        Event::Restart => "a restart",
    }
}
