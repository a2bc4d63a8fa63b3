//! Everything a question is answered with, before it is put in words.

use ratewright_control::SWING_SHARE;
use ratewright_ratio::plan::seconds_to_slip;
use ratewright_ratio::stages::Chain;
use ratewright_ratio::{
    Cadence, Exact, Fraction, Lazy, Stepping, SteppingError, residual, simplest,
};

use super::frames::Frames;
use super::limits::not_allowed;
use super::question::Question;
use crate::failure::Failure;
use ratewright_ratio::allowed::Answer;

/// What was found.
#[derive(Debug)]
pub(crate) struct Findings {
    pub(crate) answer: Answer,
    /// What the intervals of the drifts mean; `None` if there are none.
    pub(crate) width: Option<Width>,
    /// The cadence with as few changes as the swing allows that the daemon runs it with.
    pub(crate) lazy: Option<Lazy>,
    pub(crate) stepping: Option<Stepping>,
    /// The best ratio in stages, if a filter was asked for.
    pub(crate) chains: Option<Vec<Chain>>,
    pub(crate) frames: Option<Frames>,
}

/// What the intervals of the drifts mean for the plan.
#[derive(Debug)]
pub(crate) struct Width {
    pub(crate) low: Exact,
    pub(crate) high: Exact,
    /// The simplest ratio inside.
    pub(crate) simplest: Option<Fraction>,
    /// Seconds to slip where the drifts are at the end of their intervals that is worst: of the best
    /// ratio, of an average of the target (less its own error), and of a lazy one (less its swing).
    pub(crate) best_lasts_s: Option<f64>,
    pub(crate) average_lasts_s: Option<f64>,
    pub(crate) lazy_lasts_s: Option<f64>,
}

impl Findings {
    pub(crate) fn new(question: &Question) -> Result<Self, Failure> {
        let answer = question.allowed.answer(&question.target);
        let answer = answer.map_err(not_allowed)?;
        let filter = question.filter.as_ref();
        let chains = filter
            .map(|filter| filter.chains(&answer.best))
            .transpose()?;
        let lazy = answer.lazy(question.headroom_samples, SWING_SHARE);
        let stepping = stepping(question, &answer)?;
        Ok(Self {
            width: width(question, &answer, lazy.as_ref(), stepping.as_ref()),
            lazy,
            stepping,
            chains,
            frames: question.frames()?,
            answer,
        })
    }
}

fn width(
    question: &Question,
    answer: &Answer,
    lazy: Option<&Lazy>,
    stepping: Option<&Stepping>,
) -> Option<Width> {
    let interval = question.interval.as_ref()?;
    let (low, high) = (*interval.lo(), *interval.hi());
    let residuals = [low, high].map(|end| residual(&answer.best, &end).abs());
    let worst = answer.residual_at_worst(interval);
    let lasts = |own_samples: f64| {
        let left_samples = (question.headroom_samples - own_samples).max(0.0);
        seconds_to_slip(worst, left_samples, question.sink_rate_hz)
    };
    let cadence = answer.cadence.as_ref().map(Cadence::error_bound);
    let on_average = cadence.or(stepping.map(Stepping::error_bound));
    Some(Width {
        low,
        high,
        simplest: simplest(interval).map(|answer| answer.fraction),
        best_lasts_s: question.seconds_to_slip(residuals[0].max(residuals[1])),
        average_lasts_s: on_average.and_then(|own| lasts(as_f64(&own))),
        lazy_lasts_s: lazy.and_then(|lazy| lasts(as_f64(&lazy.swing()))),
    })
}

pub(crate) fn as_f64(exact: &Exact) -> f64 {
    *exact.numer() as f64 / *exact.denom() as f64
}

/// Stepping with the phases asked for; else beside a cadence, where it helps.
fn stepping(question: &Question, answer: &Answer) -> Result<Option<Stepping>, Failure> {
    if let Some(phases) = question.phases {
        let stepping = Stepping::new(&answer.target, phases);
        return stepping.map(Some).map_err(|error| {
            Failure::Usage(match error {
                SteppingError::TooFewPhases { phases, wanted } => {
                    let least = wanted.ceil().to_integer();
                    format!(
                        "--phases is {phases}; accepted are {least} to 2^63 - 1: at least the target"
                    )
                }
                other => format!("--phases is {phases}: {other}"),
            })
        });
    }
    Ok(answer.stepping_of_equal_size(&question.allowed))
}

impl Question {
    /// How long the headroom lasts at a residual.
    pub(crate) fn seconds_to_slip(&self, residual: f64) -> Option<f64> {
        seconds_to_slip(residual, self.headroom_samples, self.sink_rate_hz)
    }

    /// How far an error in output samples is in time, s, if the sink's rate is known.
    pub(crate) fn seconds_of(&self, samples: &Exact) -> Option<f64> {
        let rate = self.sink_rate_hz?;
        Some(as_f64(samples) * *rate.denom() as f64 / *rate.numer() as f64)
    }

    /// The source's true rate, Hz, if it is known: the sink's over the target.
    pub(crate) fn source_rate_hz(&self) -> Option<f64> {
        let sink = self.sink_rate_hz?;
        let target = *self.target.numer() as f64 / *self.target.denom() as f64;
        Some(*sink.numer() as f64 / *sink.denom() as f64 / target)
    }
}
