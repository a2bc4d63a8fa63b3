//! What the planner found, in words and pictures.

use maud::{Markup, html};
use ratewright_pictures::{Fractions, Neighbour, Turns, ladder};
use ratewright_proto::v1::{self, certificate::Proof};
use ratewright_ratio::{Bounds, Cadence, Exact, Fraction, residual, sideband::level_db};

use super::tables;
use crate::page::{fractions, words};

/// Blocks that the picture of a cadence shows at most.
const BLOCKS: u64 = 120;
/// A bound of L or M where none is given.
const USUAL: u64 = 1024;

/// A plan, ready to be shown.
#[derive(Debug)]
pub(super) struct Answer {
    request: v1::PlanRatioRequest,
    plan: v1::PlanRatioResponse,
    target: Exact,
    best: v1::Candidate,
    ratio: Fraction,
}

impl Answer {
    /// None if the plan is not whole, which cannot be.
    pub(super) fn new(request: v1::PlanRatioRequest, plan: v1::PlanRatioResponse) -> Option<Self> {
        let target = plan.target.as_ref()?;
        let target = Exact::new(
            target.numerator.parse().ok()?,
            target.denominator.parse().ok()?,
        );
        let best = plan.best.clone()?;
        let ratio = fraction(best.ratio?);
        Some(Self {
            request,
            plan,
            target,
            best,
            ratio,
        })
    }

    pub(super) fn markup(&self) -> Markup {
        html! {
            (self.nearest())
            section #ladder aria-labelledby="ladder-head" {
                h2 #ladder-head { "What a larger filter bank buys" }
                (words::picture("ladder-picture", &ladder(&self.rungs())))
                (tables::ladder(&self.plan.ladder))
            }
            (self.cadence())
            (tables::stepping(self.plan.stepping.as_ref(), &self.stepping_sound()))
            @if self.request.filter.is_some() { (tables::chains(&self.plan.chains, self.ratio)) }
            (tables::frames(&self.plan))
        }
    }

    fn nearest(&self) -> Markup {
        let value = *self.target.numer() as f64 / *self.target.denom() as f64;
        let target = html! {
            span .figure { (format!("{value:.12}")) }
            span .aside { (self.target) }
        };
        let off = html! {
            @if self.best.exact { "nothing: it is exact" } @else {
                span .figure { (words::ppb(self.best.residual_ppb * 1e-9)) " ppb" }
                span .aside { @if self.best.residual_ppb > 0.0 { "makes too much" } @else { "makes too little" } }
            }
        };
        let lasts = html! {
            @match self.best.seconds_to_slip { Some(s) => (words::span(s)), None => "for ever" }
            @if let Some(s) = self.plan.seconds_to_slip_at_worst {
                span .aside { (words::span(s)) " where the drifts are at the worse end" }
            }
        };
        html! {
            section #nearest aria-labelledby="nearest-head" {
                h2 #nearest-head { "The nearest ratio" }
                (words::facts("best", [
                    ("Target", target),
                    ("Nearest", html! { span .figure.ratio { (self.ratio.numer()) "/" (self.ratio.denom()) } }),
                    ("Off by", off),
                    ("Its headroom lasts", lasts),
                ]))
                (words::picture("fractions", &self.fractions().draw()))
                @if let Some(proof) = self.proof() { p #proof { (proof) } }
                @if let Some(simplest) = &self.plan.simplest {
                    p #simplest {
                        "The simplest ratio within what is known of the drifts is "
                        span .figure { (simplest.numerator) "/" (simplest.denominator) }
                        @if !self.plan.simplest_allowed { ", which is beyond the bounds" } "."
                    }
                }
            }
        }
    }

    fn bounds(&self) -> Option<Bounds> {
        let bound = |sent: u64| if sent == 0 { USUAL } else { sent };
        let bounds = Bounds::new(bound(self.request.max_l), bound(self.request.max_m)).ok()?;
        match self.request.largest_prime {
            0 => Some(bounds),
            prime => bounds.with_largest_prime(prime).ok(),
        }
    }

    fn fractions(&self) -> Fractions {
        let bounds = self.bounds();
        let half = self.request.source_drift_half_width + self.request.sink_drift_half_width;
        Fractions {
            title: "The fractions around the target".to_owned(),
            allowed: bounds
                .map_or_else(Vec::new, |bounds| fractions::around(&self.target, &bounds)),
            run: vec![fractions::neighbour(&self.ratio, &self.target)],
            max_m: bounds.as_ref().map(Bounds::max_m),
            gap: self.bracket().and_then(|(low, high)| {
                let off = |end: &v1::Fraction| {
                    let parts = (end.numerator.parse().ok()?, end.denominator.parse().ok()?);
                    let proper = parts.0 > 0 && parts.1 > 0;
                    proper.then(|| residual(&Fraction::new(parts.0, parts.1), &self.target))
                };
                off(low).zip(off(high))
            }),
            interval: (half > 0.0).then_some((-half, half)),
            holding: None,
            wanted: None,
        }
    }

    fn bracket(&self) -> Option<(&v1::Fraction, &v1::Fraction)> {
        match self.best.certificate.as_ref()?.proof.as_ref()? {
            Proof::Nearest(bracket) => Some((bracket.below.as_ref()?, bracket.above.as_ref()?)),
            _ => None,
        }
    }

    fn proof(&self) -> Option<Markup> {
        if let Some((below, above)) = self.bracket() {
            return Some(html! {
                "Nothing within the bounds lies between "
                span .figure { (below.numerator) "/" (below.denominator) } " and "
                span .figure { (above.numerator) "/" (above.denominator) }
                ", so the nearer of the two is the nearest of all."
            });
        }
        match self.best.certificate.as_ref()?.proof.as_ref()? {
            Proof::Uncertified(reason) => Some(html! { "There is no short proof: " (reason) "." }),
            _ => None,
        }
    }

    fn rungs(&self) -> Vec<Neighbour> {
        let ratios = self.plan.ladder.iter().filter_map(|rung| rung.ratio);
        ratios
            .map(|ratio| fractions::neighbour(&fraction(ratio), &self.target))
            .collect()
    }

    fn cadence(&self) -> Markup {
        let Some((cadence, turns)) = self.plan.cadence.as_ref().zip(self.turns()) else {
            return html! {};
        };
        let [low, high] = &turns.ratios;
        html! {
            section #cadence aria-labelledby="cadence-head" {
                h2 #cadence-head { "Two ratios in turn" }
                p {
                    span .figure { (low) } " and " span .figure { (high) } ", "
                    (words::shares(cadence.low_blocks, cadence.high_blocks))
                    ", average the target exactly, and are never off by more than "
                    (words::at_most(cadence.error_bound_samples)) " output samples at a block's end"
                    @if let Some(changes) = self.plan.cadence_changes_per_second {
                        ", changing every " (words::seconds(1.0 / changes))
                    }
                    ". Both tables are in memory: " (turns_phases(cadence)) " phases."
                }
                (self.sound(cadence.error_bound_samples))
                (self.at_worst("an average", self.plan.average_seconds_to_slip_at_worst))
                (words::picture("turns-picture", &turns.draw()))
                (self.lazy())
            }
        }
    }

    /// The same two ratios as a crossing with lazy switching runs them.
    fn lazy(&self) -> Markup {
        let Some(lazy) = &self.plan.lazy else {
            return html! {};
        };
        html! {
            h3 #lazy { "Each held as long as may be (lazy)" }
            p {
                "The same two, off by up to " (words::at_most(lazy.swing_samples))
                " output samples, a quarter of the headroom, as a crossing runs them"
                @if let Some(changes) = self.plan.lazy_changes_per_second {
                    ", changing every " (words::span(1.0 / changes))
                }
                @if let Some(step) = lazy.cadence.as_ref().and_then(|pair| self.pitch_step(pair)) {
                    "; the pitch then steps by " (words::parts(step))
                }
                "."
            }
            (self.at_worst("lazy switching", self.plan.lazy_seconds_to_slip_at_worst))
        }
    }

    fn pitch_step(&self, pair: &v1::Cadence) -> Option<f64> {
        let off = |ratio: v1::Ratio| residual(&fraction(ratio), &self.target);
        Some(off(pair.high?) - off(pair.low?))
    }

    fn at_worst(&self, what: &str, lasts_s: Option<f64>) -> Markup {
        html! {
            @if let Some(seconds) = lasts_s {
                p {
                    "Where the drifts are at the worse end of what is known, the headroom lasts "
                    (words::span(seconds)) " with " (what) ", until they are measured better."
                }
            }
        }
    }

    fn stepping_sound(&self) -> Markup {
        let bound = self
            .plan
            .stepping
            .as_ref()
            .map(|table| table.error_bound_samples);
        html! { @if let Some(bound) = bound { (self.sound(bound)) } }
    }

    /// What an error in output samples is in time, and how loud.
    fn sound(&self, error_samples: f64) -> Markup {
        let Some(sink) = self.request.sink_rate.filter(|_| error_samples > 0.0) else {
            return html! {};
        };
        let peak_s = error_samples * sink.denominator as f64 / sink.numerator as f64;
        let level = |tone_hz| format!("{:.0}", level_db(peak_s, tone_hz)).replace('-', "\u{2212}");
        html! {
            p {
                "That is " (words::seconds(peak_s)) " at most, and makes sidebands of "
                (level(1_000.0)) " dB on a tone of 1 kHz and of " (level(20_000.0)) " dB on one of 20 kHz "
                span .aside.inline { "(narrowband phase modulation, 20 log\u{2081}\u{2080} \u{3c0}f\u{3c4} dB of the tone)" } "."
            }
        }
    }

    fn turns(&self) -> Option<Turns> {
        let sent = self.plan.cadence.as_ref()?;
        let (low, high) = (fraction(sent.low?), fraction(sent.high?));
        let cadence = Cadence::of_pair(&self.target, low, high).ok()?;
        let mut state = cadence.start();
        let blocks = (0..cadence.period_blocks().min(BLOCKS)).map(|_| {
            let block = state.next_block();
            let error = state.error_outputs();
            (block == high, *error.numer() as f64 / *error.denom() as f64)
        });
        let text = |ratio: Fraction| format!("{}/{}", ratio.numer(), ratio.denom());
        Some(Turns {
            blocks: blocks.collect(),
            bound_samples: sent.error_bound_samples,
            ratios: [text(low), text(high)],
        })
    }
}

/// Phases of the filters of both ratios.
fn turns_phases(cadence: &v1::Cadence) -> u64 {
    let l = |ratio: &Option<v1::Ratio>| ratio.as_ref().map_or(0, |ratio| ratio.l);
    l(&cadence.low).saturating_add(l(&cadence.high))
}

/// As it is: where a part has to be a multiple, common factors stay.
fn fraction(ratio: v1::Ratio) -> Fraction {
    Fraction::new_raw(ratio.l, ratio.m)
}
