//! A question's answer as it is sent.

use ratewright_control::SWING_SHARE;
use ratewright_proto::v1;
use ratewright_ratio::{
    Cadence, Exact, Fraction, FrameCadence, Lazy, MultipleBest, Rung, Stepping, SteppingError,
    filter_coefficients,
    plan::seconds_to_slip,
    residual, simplest,
    stages::{Chain, Stage, StageError, front},
};

use super::{Filter, Question, limit};
use crate::convert::{rate, setting};
use crate::refused::{Refused, Violation};
use ratewright_ratio::allowed::{Answer, Proof, ROUNDED};

/// Most frames that are listed.
const LISTED_FRAMES: u64 = 4_096;

/// Answers a question. It may take a while: bounds on prime factors and stages are searched.
pub(crate) fn answer(question: &Question) -> Result<v1::PlanRatioResponse, Refused> {
    let found = question.allowed.answer(&question.target);
    let found = found.map_err(limit::not_allowed)?;
    let chains = match &question.filter {
        Some(filter) => chains(filter, &found.best)?,
        None => Vec::new(),
    };
    let stepping = stepping(question, &found)?;
    let simplest = question.interval.as_ref().and_then(simplest);
    let frames = question.frames.as_ref();
    let lazy = found.lazy(question.headroom_samples, SWING_SHARE);
    let at_worst = AtWorst::new(question, &found, lazy.as_ref(), stepping.as_ref());
    let source_hz = question.source_rate_hz();
    let on_side = |ratio: Fraction| candidate(question, &ratio, residual(&ratio, &found.target));
    Ok(v1::PlanRatioResponse {
        target: Some(rate::fraction_to_wire(&found.target)),
        best: Some(v1::Candidate {
            certificate: Some(certificate(&found)),
            ..candidate(question, &found.best, found.residual)
        }),
        ladder: ladder(question, &found.ladder),
        cadence: found.cadence.as_ref().map(setting::cadence_to_wire),
        simplest: simplest.map(|simplest| rate::fraction_to_wire(&simplest.fraction)),
        reduced: match &found.proof {
            Proof::Reduced(reduced) => Some(reduced_to_wire(reduced)),
            _ => None,
        },
        stepping: stepping.as_ref().map(setting::stepping_to_wire),
        chains: chains.iter().map(chain_to_wire).collect(),
        source_frames: frames.map(|(source, _)| frames_to_wire(source)),
        sink_frames: frames.map(|(_, sink)| frames_to_wire(sink)),
        below: found.below().map(on_side),
        above: found.above().map(on_side),
        lazy: lazy.map(|lazy| v1::Lazy {
            cadence: Some(setting::cadence_to_wire(lazy.cadence())),
            swing_samples: double(&lazy.swing()),
        }),
        cadence_changes_per_second: source_hz
            .zip(found.cadence)
            .map(|(hz, cadence)| cadence.switches_per_second(hz)),
        lazy_changes_per_second: source_hz
            .zip(lazy)
            .map(|(hz, lazy)| lazy.switches_per_second(hz)),
        seconds_to_slip_at_worst: at_worst.best_s,
        average_seconds_to_slip_at_worst: at_worst.average_s,
        lazy_seconds_to_slip_at_worst: at_worst.lazy_s,
        simplest_allowed: simplest
            .is_some_and(|simplest| question.allowed.allows(&simplest.fraction)),
    })
}

/// Seconds that the headroom lasts where the drifts are at the worse ends of their intervals.
#[derive(Default)]
struct AtWorst {
    best_s: Option<f64>,
    average_s: Option<f64>,
    lazy_s: Option<f64>,
}

impl AtWorst {
    fn new(
        question: &Question,
        found: &Answer,
        lazy: Option<&Lazy>,
        stepping: Option<&Stepping>,
    ) -> Self {
        let Some(interval) = &question.interval else {
            return Self::default();
        };
        let headroom = question.headroom_samples;
        let on_average = found.residual_at_worst(interval);
        let average_lasts = |own: f64| {
            let left = (headroom - own).max(0.0);
            seconds_to_slip(on_average, left, question.sink_rate_hz)
        };
        let ends = [interval.lo(), interval.hi()];
        let best = ends.map(|end| residual(&found.best, end).abs());
        let cadence = found.cadence.as_ref().map(Cadence::error_bound);
        let average = cadence.or(stepping.map(Stepping::error_bound));
        Self {
            best_s: seconds_to_slip(best[0].max(best[1]), headroom, question.sink_rate_hz),
            average_s: average.and_then(|own| average_lasts(double(&own))),
            lazy_s: lazy.and_then(|lazy| average_lasts(double(&lazy.swing()))),
        }
    }
}

fn double(exact: &Exact) -> f64 {
    *exact.numer() as f64 / *exact.denom() as f64
}

fn certificate(found: &Answer) -> v1::Certificate {
    // The nearest ratio is proved by a bracket, never by an interval.
    let interval = (&found.best, &found.best);
    match &found.proof {
        Proof::Direct(direct) => setting::certificate_to_wire(direct, interval),
        Proof::Reduced(reduced) => {
            setting::certificate_to_wire(&reduced.reduced.certificate, interval)
        }
        Proof::Rounded => v1::Certificate {
            proof: Some(v1::certificate::Proof::Uncertified(ROUNDED.to_owned())),
        },
    }
}

/// The first and the last ratio of each rung: a rung may hold thousands.
fn ladder(question: &Question, rungs: &[Rung]) -> Vec<v1::Candidate> {
    let mut ladder = Vec::new();
    for rung in rungs {
        ladder.push(candidate(question, &rung.first, rung.first_residual));
        if rung.count > 1 {
            ladder.push(candidate(question, &rung.last(), rung.last_residual));
        }
    }
    ladder
}

fn candidate(question: &Question, ratio: &Fraction, residual: f64) -> v1::Candidate {
    let (headroom, sink) = (question.headroom_samples, question.sink_rate_hz);
    let filter = question.filter.as_ref();
    v1::Candidate {
        ratio: Some(rate::ratio_to_wire(ratio)),
        exact: residual == 0.0,
        residual_ppb: residual * 1e9,
        seconds_to_slip: seconds_to_slip(residual, headroom, sink),
        certificate: None,
        coefficients: filter.map_or(0, |filter| coefficients(filter, ratio)),
    }
}

/// Coefficients of one filter for the whole of a ratio.
fn coefficients(filter: &Filter, ratio: &Fraction) -> u64 {
    let ratio = ratio.reduced();
    let (l, m) = (*ratio.numer(), *ratio.denom());
    filter_coefficients(l, m, filter.spec.stopband_db, filter.relative_width)
}

fn reduced_to_wire(reduced: &MultipleBest) -> v1::ReducedProblem {
    v1::ReducedProblem {
        target: Some(rate::fraction_to_wire(&reduced.target)),
        max_l: reduced.bounds.max_l(),
        max_m: reduced.bounds.max_m(),
        ratio: Some(rate::ratio_to_wire(&reduced.reduced.ratio)),
    }
}

/// Stepping with the phases asked for; else beside a cadence, where it helps.
fn stepping(question: &Question, found: &Answer) -> Result<Option<Stepping>, Violation> {
    if let Some(phases) = question.phases {
        let stepping = Stepping::new(&found.target, phases);
        return stepping.map(Some).map_err(|why| match why {
            SteppingError::TooFewPhases { wanted, .. } => {
                let least = wanted.ceil().to_integer();
                Violation::new(
                    "phases",
                    phases,
                    format!("{least} to 2^63 - 1: at least the target"),
                )
            }
            SteppingError::TooFine { .. } => {
                let accepted = "fewer phases, or a target with a smaller numerator and denominator";
                Violation::new("phases", phases, accepted)
            }
        });
    }
    Ok(found.stepping_of_equal_size(&question.allowed))
}

fn chains(filter: &Filter, ratio: &Fraction) -> Result<Vec<Chain>, Violation> {
    front(ratio.reduced(), &filter.spec).map_err(|why| match why {
        StageError::Passband { value, limit } => {
            let accepted = format!("above 0 and below {limit} Hz, half the smaller rate");
            Violation::new("filter.passband_hz", value, accepted)
        }
        StageError::Stopband { value } => {
            Violation::new("filter.attenuation_db", value, "21 to 240 dB")
        }
        StageError::Part { .. } | StageError::SourceRate { .. } => {
            let accepted = "limits that leave the best ratio an L and an M up to 65536";
            Violation::new(
                "filter",
                format!("sent, and the best ratio is {ratio}"),
                accepted,
            )
        }
    })
}

fn chain_to_wire(chain: &Chain) -> v1::Chain {
    let stage_to_wire = |stage: &Stage| v1::Stage {
        l: stage.l,
        m: stage.m,
        taps_per_phase: stage.taps_per_phase,
    };
    v1::Chain {
        stages: chain.stages.iter().map(stage_to_wire).collect(),
        multiply_adds: chain.cost.multiply_adds,
        coefficients: chain.cost.coefficients,
        delay_seconds: chain.cost.delay_s,
    }
}

fn frames_to_wire(cadence: &FrameCadence) -> v1::FrameSamples {
    let listed = 0..cadence.period_frames().min(LISTED_FRAMES);
    v1::FrameSamples {
        period_frames: cadence.period_frames(),
        period_samples: cadence.period_samples(),
        samples: listed.map(|frame| cadence.samples_in(frame)).collect(),
    }
}
