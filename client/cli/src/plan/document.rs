//! A plan as JSON.

use ratewright_ratio::stages::Chain;
use ratewright_ratio::{
    Bounds, Cadence, Certificate, Exact, Fraction, FrameCadence, Lazy, MAX_BOUND, Multiple, Rung,
    Stepping, residual,
};
use serde_json::{Value, json};

use super::Parts;
use super::filter::{self, Filter};
use super::findings::{Findings, Width, as_f64};
use super::frames::{self, Frames, LISTED_FRAMES};
use super::question::Question;
use super::sound::{self, TONES_HZ};
use ratewright_ratio::allowed::{Allowed, Answer, Proof, ROUNDED};

/// The document. Ratios are numbers `l` and `m`; exact fractions of any size are texts `n/d`.
pub(crate) fn document(question: &Question, findings: &Findings) -> Value {
    let answer = &findings.answer;
    let stages = question.filter.as_ref().zip(findings.chains.as_ref());
    json!({
        "target": Parts::from(&answer.target).to_string(),
        "bounds": bounds(&question.allowed),
        "headroom_samples": question.headroom_samples,
        "sink_hz": question.sink_rate_hz.map(|rate| Parts::from(&rate).to_string()),
        "best": best(question, answer),
        "below": answer.below().map(|ratio| single(question, answer, &ratio)),
        "above": answer.above().map(|ratio| single(question, answer, &ratio)),
        "interval": findings.width.as_ref().map(|width| interval(question, width)),
        "ladder": answer.ladder.iter().map(|rung| step(question, rung)).collect::<Vec<_>>(),
        "cadence": answer.cadence.as_ref().map(|pair| cadence(question, pair)),
        "lazy": findings.lazy.as_ref().map(|lazy| lazy_cadence(question, findings, lazy)),
        "stepping": findings.stepping.as_ref().map(|table| stepping(question, table)),
        "stages": stages.map(|(filter, chains)| stage_plan(filter, chains)),
        "frames": findings.frames.as_ref().map(frame_plan),
    })
}

/// The limits; null where there is none of that kind.
fn bounds(allowed: &Allowed) -> Value {
    let limit = |bound: u64| (bound < MAX_BOUND).then_some(bound);
    let of = |bounds: &Bounds| [limit(bounds.max_l()), limit(bounds.max_m())];
    let ([max_l, max_m], prime, kind) = match allowed {
        Allowed::Bounded(bounds) => (of(bounds), bounds.largest_prime(), Value::Null),
        Allowed::Product { max_product } => {
            ([None, None], None, json!({ "max_product": max_product }))
        }
        Allowed::Cost {
            weight_l,
            weight_m,
            max_cost,
        } => {
            let cost = json!({ "max_cost": max_cost, "weight_l": weight_l, "weight_m": weight_m });
            ([None, None], None, cost)
        }
        Allowed::Multiple(Multiple::OfL(k), bounds) => {
            (of(bounds), None, json!({ "l_multiple_of": k }))
        }
        Allowed::Multiple(Multiple::OfM(k), bounds) => {
            (of(bounds), None, json!({ "m_multiple_of": k }))
        }
        Allowed::FixedM { m, max_l } => ([limit(*max_l), None], None, json!({ "fixed_m": m })),
        Allowed::PowerOfTwoM(bounds) => (of(bounds), None, json!({ "power_of_two_m": true })),
    };
    json!({ "max_l": max_l, "max_m": max_m, "largest_prime": prime, "limit": kind })
}

fn ratio(ratio: &Fraction) -> Value {
    json!({ "l": ratio.numer(), "m": ratio.denom() })
}

fn best(question: &Question, answer: &Answer) -> Value {
    let mut document = single(question, answer, &answer.best);
    document["certificate"] = proof(&answer.proof);
    document
}

/// One ratio and what it does.
fn single(question: &Question, answer: &Answer, ratio: &Fraction) -> Value {
    let residual = residual(ratio, &answer.target);
    json!({
        "l": ratio.numer(),
        "m": ratio.denom(),
        "exact": residual == 0.0,
        "residual_ppb": residual * 1e9,
        "seconds_to_slip": question.seconds_to_slip(residual),
    })
}

/// The ends of the bracket that proves the choice; `0/1` and `1/0` where nothing allowed is beyond.
/// With a multiple they prove the choice of `reduced`, from which the multiple is divided out.
fn proof(proof: &Proof) -> Value {
    match proof {
        Proof::Direct(direct) => certificate(direct),
        Proof::Reduced(found) => {
            let mut document = certificate(&found.reduced.certificate);
            document["reduced"] = json!({
                "l": found.reduced.ratio.numer(),
                "m": found.reduced.ratio.denom(),
                "target": Parts::from(&found.target).to_string(),
                "max_l": found.bounds.max_l(),
                "max_m": found.bounds.max_m(),
            });
            document
        }
        Proof::Rounded => uncertified(ROUNDED),
    }
}

fn certificate(certificate: &Certificate) -> Value {
    match certificate {
        Certificate::Nearest(bracket) | Certificate::NeighbourPair(bracket) => json!({
            "below": bracket.below.to_string(),
            "above": bracket.above.to_string(),
        }),
        Certificate::Uncertified(reason) => uncertified(&reason.to_string()),
        other => uncertified(&format!("{other:?}")),
    }
}

fn uncertified(why: &str) -> Value {
    json!({ "below": null, "above": null, "uncertified": why })
}

fn interval(question: &Question, width: &Width) -> Value {
    json!({
        "low": Parts::from(&width.low).to_string(),
        "high": Parts::from(&width.high).to_string(),
        "simplest": width.simplest.as_ref().map(ratio),
        "simplest_allowed": width.simplest.as_ref().map(|ratio| question.allowed.allows(ratio)),
        "seconds_to_slip_at_worst": width.best_lasts_s,
        "average_seconds_to_slip_at_worst": width.average_lasts_s,
        "lazy_seconds_to_slip_at_worst": width.lazy_lasts_s,
    })
}

/// The nearest ratio of a run, and the run that leads to it: `first`, then `step` added to both
/// parts each time.
fn step(question: &Question, rung: &Rung) -> Value {
    let last = rung.last();
    let mut document = json!({
        "l": last.numer(),
        "m": last.denom(),
        "exact": rung.last_residual == 0.0,
        "residual_ppb": rung.last_residual * 1e9,
        "seconds_to_slip": question.seconds_to_slip(rung.last_residual),
        "run": {
            "first": ratio(&rung.first),
            "first_residual_ppb": rung.first_residual * 1e9,
            "step": { "l": rung.step.l, "m": rung.step.m },
            "count": rung.count,
        },
    });
    if let Some(filter) = &question.filter {
        document["coefficients"] = filter.coefficients(&last).into();
    }
    document
}

fn cadence(question: &Question, cadence: &Cadence) -> Value {
    let block = |ratio: Fraction, count: u64| json!({ "l": ratio.numer(), "m": ratio.denom(), "count": count });
    let bound = cadence.error_bound();
    json!({
        "low": block(cadence.low(), cadence.low_blocks()),
        "high": block(cadence.high(), cadence.high_blocks()),
        "error_bound_samples": as_f64(&bound),
        "sound": jitter(question, &bound),
        "changes_per_second": question.source_rate_hz().map(|hz| cadence.switches_per_second(hz)),
    })
}

/// The two ratios are those of the cadence; the swing is what the error may be, either way.
fn lazy_cadence(question: &Question, findings: &Findings, lazy: &Lazy) -> Value {
    json!({
        "swing_samples": as_f64(&lazy.swing()),
        "pitch_step_ppb": sound::pitch_step(findings).map(|step| step * 1e9),
        "changes_per_second": question.source_rate_hz().map(|hz| lazy.switches_per_second(hz)),
    })
}

/// The two advances are equal if one is exact.
fn stepping(question: &Question, stepping: &Stepping) -> Value {
    let (advance, longer_advance) = stepping.advances();
    let bound = stepping.error_bound();
    json!({
        "phases": stepping.phases(),
        "advance": advance,
        "longer_advance": longer_advance,
        "error_bound_samples": as_f64(&bound),
        "sound": jitter(question, &bound),
    })
}

/// The time error and the sidebands that it makes on tones of 1 and 20 kHz, by narrowband phase
/// modulation; null without rates.
fn jitter(question: &Question, bound: &Exact) -> Option<Value> {
    let jitter = sound::jitter(question, bound)?;
    let tones = TONES_HZ.into_iter().zip(jitter.sidebands_db);
    let sidebands = tones.map(|(hz, db)| json!({ "tone_hz": hz, "level_db": db }));
    Some(json!({
        "peak_seconds": jitter.peak_s,
        "sidebands": sidebands.collect::<Vec<_>>(),
    }))
}

fn stage_plan(filter: &Filter, chains: &[Chain]) -> Value {
    json!({
        "passband_hz": filter.spec.passband_hz,
        "attenuation_db": filter.spec.stopband_db,
        "estimate": filter::ESTIMATE,
        "chains": chains.iter().map(chain).collect::<Vec<_>>(),
    })
}

fn chain(chain: &Chain) -> Value {
    let stages = chain
        .stages
        .iter()
        .map(|stage| json!({ "l": stage.l, "m": stage.m, "taps_per_phase": stage.taps_per_phase }));
    json!({
        "stages": stages.collect::<Vec<_>>(),
        "multiply_adds": chain.cost.multiply_adds,
        "coefficients": chain.cost.coefficients,
        "delay_seconds": chain.cost.delay_s,
    })
}

fn frame_plan(frames: &Frames) -> Value {
    json!({
        "rate_hz": Parts::from(&frames.rate).to_string(),
        "source": frame_samples(&frames.source),
        "sink": frame_samples(&frames.sink),
    })
}

/// `samples` has the frames of a period in order, or its first 4096.
fn frame_samples(cadence: &FrameCadence) -> Value {
    json!({
        "period_frames": cadence.period_frames(),
        "period_samples": cadence.period_samples(),
        "samples": frames::listed(cadence, LISTED_FRAMES).collect::<Vec<_>>(),
    })
}
