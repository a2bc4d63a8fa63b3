//! Everything a question is answered with, before it is put in words.

use ratewright_ratio::plan::seconds_to_slip;
use ratewright_ratio::stages::Chain;
use ratewright_ratio::{Exact, Fraction, Lazy, Stepping, SteppingError, residual, simplest};

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
    /// The cadence with as few changes as the headroom allows.
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
    /// Seconds to slip of the best ratio at the end where it fares worst.
    pub(crate) seconds_to_slip_at_worst: Option<f64>,
}

impl Findings {
    pub(crate) fn new(question: &Question) -> Result<Self, Failure> {
        let answer = question.allowed.answer(&question.target);
        let answer = answer.map_err(not_allowed)?;
        let filter = question.filter.as_ref();
        let chains = filter
            .map(|filter| filter.chains(&answer.best))
            .transpose()?;
        Ok(Self {
            width: width(question, &answer.best),
            lazy: answer.lazy(question.headroom_samples),
            stepping: stepping(question, &answer)?,
            chains,
            frames: question.frames()?,
            answer,
        })
    }
}

fn width(question: &Question, best: &Fraction) -> Option<Width> {
    let interval = question.interval.as_ref()?;
    let (low, high) = (*interval.lo(), *interval.hi());
    let residuals = [low, high].map(|end| residual(best, &end).abs());
    Some(Width {
        low,
        high,
        simplest: simplest(interval).map(|answer| answer.fraction),
        seconds_to_slip_at_worst: question.seconds_to_slip(residuals[0].max(residuals[1])),
    })
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
    Ok(answer.stepping_of_equal_size())
}

impl Question {
    /// How long the headroom lasts at a residual.
    pub(crate) fn seconds_to_slip(&self, residual: f64) -> Option<f64> {
        seconds_to_slip(residual, self.headroom_samples, self.sink_rate_hz)
    }

    /// The source's true rate, Hz, if it is known: the sink's over the target.
    pub(crate) fn source_rate_hz(&self) -> Option<f64> {
        let sink = self.sink_rate_hz?;
        let target = *self.target.numer() as f64 / *self.target.denom() as f64;
        Some(*sink.numer() as f64 / *sink.denom() as f64 / target)
    }
}
