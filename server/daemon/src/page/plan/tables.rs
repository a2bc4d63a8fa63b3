//! The planner's tables.

use maud::{Markup, html};
use ratewright_proto::v1;
use ratewright_ratio::Fraction;

use crate::page::words;

/// Chains of stages that are listed.
const CHAINS: usize = 12;
/// Video frames that are listed.
const FRAMES: usize = 15;

pub(super) fn ladder(rungs: &[v1::Candidate]) -> Markup {
    let filtered = rungs.iter().any(|rung| rung.coefficients > 0);
    html! {
        details {
            summary { "The ladder in figures" }
            table role="table" {
                caption { "Each is the best of its size. Of a long run of ratios the first and the last are shown." }
                thead role="rowgroup" {
                    tr role="row" {
                        th role="columnheader" scope="col" { "L/M" }
                        th role="columnheader" scope="col" .number { "Off by, ppb" }
                        th role="columnheader" scope="col" { "Headroom lasts" }
                        @if filtered { th role="columnheader" scope="col" .number { "Coefficients" } }
                    }
                }
                tbody role="rowgroup" {
                    @for rung in rungs { (rung_row(rung, filtered)) }
                }
            }
        }
    }
}

fn rung_row(rung: &v1::Candidate, filtered: bool) -> Markup {
    let ratio = rung.ratio.unwrap_or_default();
    html! {
        tr role="row" {
            th role="rowheader" scope="row" .ratio { (ratio.l) "/" (ratio.m) }
            td role="cell" data-head="Off by, ppb" .number {
                @if rung.exact { "exact" } @else { (words::ppb(rung.residual_ppb * 1e-9)) }
            }
            td role="cell" data-head="Headroom lasts" {
                @match rung.seconds_to_slip { Some(s) => (words::span(s)), None => "for ever" }
            }
            @if filtered { td role="cell" data-head="Coefficients" .number { (rung.coefficients) } }
        }
    }
}

pub(super) fn stepping(stepping: Option<&v1::Stepping>, sound: &Markup) -> Markup {
    html! {
        @if let Some(stepping) = stepping {
            section #stepping aria-labelledby="stepping-head" {
                h2 #stepping-head { "One table of phases" }
                p {
                    @if stepping.advance == stepping.longer_advance {
                        (stepping.phases) " phases, advancing by " (stepping.advance) " at each output: exact."
                    } @else {
                        (stepping.phases) " phases, advancing by " (stepping.advance) " or "
                        (stepping.longer_advance) " at each output: never off by more than "
                        (words::at_most(stepping.error_bound_samples)) " output samples."
                    }
                }
                (sound)
            }
        }
    }
}

pub(super) fn chains(chains: &[v1::Chain], ratio: Fraction) -> Markup {
    html! {
        section #stages aria-labelledby="stages-head" {
            h2 #stages-head { "In stages" }
            p .note {
                "Ways to make " span .figure { (ratio.numer()) "/" (ratio.denom()) } " of which none beats another \
                 in work, memory and delay together. Lengths are Kaiser's estimate (1974): measure the filter."
            }
            table role="table" {
                caption {
                    "By work for one sink sample."
                    @if chains.len() > CHAINS { " The first " (CHAINS) " of " (chains.len()) "." }
                }
                thead role="rowgroup" {
                    tr role="row" {
                        th role="columnheader" scope="col" { "Stages" }
                        th role="columnheader" scope="col" .number { "Multiply-adds" }
                        th role="columnheader" scope="col" .number { "Coefficients" }
                        th role="columnheader" scope="col" .number { "Delay" }
                        th role="columnheader" scope="col" { "Taps a phase" }
                    }
                }
                tbody role="rowgroup" {
                    @for chain in chains.iter().take(CHAINS) { (chain_row(chain)) }
                }
            }
        }
    }
}

fn chain_row(chain: &v1::Chain) -> Markup {
    let joined = |part: fn(&v1::Stage) -> String, by: &str| {
        let parts: Vec<String> = chain.stages.iter().map(part).collect();
        parts.join(by)
    };
    let stages = match chain.stages.is_empty() {
        true => "none".to_owned(),
        false => joined(|stage| format!("{}/{}", stage.l, stage.m), " \u{b7} "),
    };
    html! {
        tr role="row" {
            th role="rowheader" scope="row" .ratio { (stages) }
            td role="cell" data-head="Multiply-adds" .number { (format!("{:.1}", chain.multiply_adds)) }
            td role="cell" data-head="Coefficients" .number { (chain.coefficients) }
            td role="cell" data-head="Delay" .number { (words::seconds(chain.delay_seconds)) }
            td role="cell" data-head="Taps a phase" { (joined(|stage| stage.taps_per_phase.to_string(), " + ")) }
        }
    }
}

pub(super) fn frames(plan: &v1::PlanRatioResponse) -> Markup {
    let (Some(source), Some(sink)) = (&plan.source_frames, &plan.sink_frames) else {
        return html! {};
    };
    html! {
        section #frames-answer aria-labelledby="frames-head" {
            h2 #frames-head { "Samples a video frame" }
            dl .facts {
                div { dt { "Of the source" } dd { (frame_row(source)) } }
                div { dt { "Of the sink" } dd { (frame_row(sink)) } }
            }
        }
    }
}

fn frame_row(frames: &v1::FrameSamples) -> Markup {
    let listed: Vec<String> = frames
        .samples
        .iter()
        .take(FRAMES)
        .map(u64::to_string)
        .collect();
    html! {
        span .figure { (listed.join(" ")) @if frames.samples.len() > FRAMES { " \u{2026}" } }
        span .aside { (frames.period_samples) " samples in " (frames.period_frames) " frames" }
    }
}
