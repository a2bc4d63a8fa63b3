//! A plan as JSON.

use ratewright_ratio::plan::{Candidate, Plan, seconds_to_slip};
use ratewright_ratio::{Cadence, Certificate, Fraction, Rung};
use serde_json::{Value, json};

use super::Parts;
use super::question::{Question, Width};

/// The document. Ratios are numbers `l` and `m`; exact fractions of any size are texts `n/d`.
pub(crate) fn document(question: &Question, plan: &Plan, width: Option<&Width>) -> Value {
    let query = &question.query;
    json!({
        "target": Parts::from(&plan.target).to_string(),
        "bounds": {
            "max_l": query.bounds.max_l(),
            "max_m": query.bounds.max_m(),
            "largest_prime": query.bounds.largest_prime(),
        },
        "headroom_samples": query.headroom_samples,
        "sink_hz": query.sink_rate_hz.map(|rate| Parts::from(&rate).to_string()),
        "best": best(&plan.best),
        "interval": width.map(|width| json!({
            "low": Parts::from(&width.low).to_string(),
            "high": Parts::from(&width.high).to_string(),
            "simplest": width.simplest.as_ref().map(ratio),
            "seconds_to_slip_at_worst": width.seconds_to_slip_at_worst,
        })),
        "ladder": plan.ladder.iter().map(|rung| step(question, rung)).collect::<Vec<_>>(),
        "cadence": plan.cadence.as_ref().map(cadence),
    })
}

fn ratio(ratio: &Fraction) -> Value {
    json!({ "l": ratio.numer(), "m": ratio.denom() })
}

fn best(best: &Candidate) -> Value {
    json!({
        "l": best.ratio.numer(),
        "m": best.ratio.denom(),
        "exact": best.residual == 0.0,
        "residual_ppb": best.residual * 1e9,
        "seconds_to_slip": best.seconds_to_slip,
        "certificate": certificate(&best.certificate),
    })
}

/// The ends of the bracket that proves the choice; `0/1` and `1/0` where nothing allowed is beyond.
fn certificate(certificate: &Certificate) -> Value {
    match certificate {
        Certificate::Nearest(bracket) | Certificate::NeighbourPair(bracket) => json!({
            "below": bracket.below.to_string(),
            "above": bracket.above.to_string(),
        }),
        Certificate::Uncertified(reason) => {
            json!({ "below": null, "above": null, "uncertified": reason.to_string() })
        }
        other => json!({ "below": null, "above": null, "uncertified": format!("{other:?}") }),
    }
}

/// The nearest ratio of a run, and the run that leads to it: `first`, then `step` added to both
/// parts each time.
fn step(question: &Question, rung: &Rung) -> Value {
    let (last, query) = (rung.last(), &question.query);
    let slip = seconds_to_slip(
        rung.last_residual,
        query.headroom_samples,
        query.sink_rate_hz,
    );
    json!({
        "l": last.numer(),
        "m": last.denom(),
        "exact": rung.last_residual == 0.0,
        "residual_ppb": rung.last_residual * 1e9,
        "seconds_to_slip": slip,
        "run": {
            "first": ratio(&rung.first),
            "first_residual_ppb": rung.first_residual * 1e9,
            "step": { "l": rung.step.l, "m": rung.step.m },
            "count": rung.count,
        },
    })
}

fn cadence(cadence: &Cadence) -> Value {
    let block = |ratio: Fraction, count: u64| json!({ "l": ratio.numer(), "m": ratio.denom(), "count": count });
    let bound = cadence.error_bound();
    json!({
        "low": block(cadence.low(), cadence.low_blocks()),
        "high": block(cadence.high(), cadence.high_blocks()),
        "error_bound_samples": *bound.numer() as f64 / *bound.denom() as f64,
    })
}
