//! From what was typed to what is asked of the ratio crate.

use num_rational::Ratio;
use ratewright_ratio::{Exact, Interval, target_from_rates};

use super::Arguments;
use super::drift::Drift;
use super::filter::Filter;
use crate::failure::Failure;
use ratewright_ratio::allowed::Allowed;

/// A question, as the ratio crate takes it and as it was put.
#[derive(Debug)]
pub(crate) struct Question {
    pub(crate) target: Exact,
    pub(crate) allowed: Allowed,
    pub(crate) headroom_samples: f64,
    /// The sink's true rate, Hz, if it is known.
    pub(crate) sink_rate_hz: Option<Ratio<u64>>,
    /// Source and sink rate, if the question was put by rates.
    pub(crate) rates: Option<(Ratio<u64>, Ratio<u64>)>,
    pub(crate) from_drift: Drift,
    pub(crate) to_drift: Drift,
    /// The targets at the ends of the drifts' intervals, if they have any.
    pub(crate) interval: Option<Interval>,
    pub(crate) filter: Option<Filter>,
    /// Phases of a resampler that steps.
    pub(crate) phases: Option<u64>,
    pub(crate) frame_rate: Option<Ratio<u64>>,
}

impl Question {
    pub(crate) fn new(arguments: &Arguments) -> Result<Self, Failure> {
        let usage = |error: &dyn std::fmt::Display| Failure::Usage(error.to_string());
        let allowed = arguments.limits.allowed()?;
        let rates = arguments.from.zip(arguments.to);
        let nominal = match (rates, arguments.target) {
            (Some((from, to)), _) => target_from_rates(from, to).map_err(|error| usage(&error))?,
            (None, Some(target)) => target,
            (None, None) => {
                return Err(Failure::Usage(
                    "give --from RATE and --to RATE, or --target N/D".into(),
                ));
            }
        };
        if rates.is_none() {
            needs_rates("--passband", arguments.filter.passband)?;
            needs_rates("--frames", arguments.frames)?;
        }
        let (from_drift, to_drift) = (arguments.from_drift, arguments.to_drift);
        let at = |from_side: i128, to_side: i128| {
            target_at(
                nominal,
                from_drift.factor(from_side),
                to_drift.factor(to_side),
            )
        };
        let target = at(0, 0)?;
        let interval = if from_drift.has_width() || to_drift.has_width() {
            // A fast source needs a small target, a fast sink a large one.
            let (low, high) = (at(1, -1)?, at(-1, 1)?);
            Some(Interval::closed(low, high).map_err(|error| usage(&error))?)
        } else {
            None
        };
        let sink_rate_hz = rates.map(|(_, to)| true_rate(to, to_drift)).transpose()?;
        Ok(Self {
            target,
            allowed,
            headroom_samples: arguments.headroom,
            sink_rate_hz,
            rates,
            from_drift,
            to_drift,
            interval,
            filter: arguments.filter.filter(rates),
            phases: arguments.phases,
            frame_rate: arguments.frames,
        })
    }
}

fn needs_rates(name: &str, value: Option<Ratio<u64>>) -> Result<(), Failure> {
    match value {
        Some(hz) => Err(Failure::Usage(format!(
            "{name} is {hz} Hz; accepted is none beside --target: give --from and --to"
        ))),
        None => Ok(()),
    }
}

fn too_many_digits() -> Failure {
    Failure::Usage(
        "the exact target needs more than 128 bits; give --from-drift and --to-drift fewer digits"
            .to_owned(),
    )
}

/// nominal · to / from, exact.
fn target_at(nominal: Exact, from: Option<Exact>, to: Option<Exact>) -> Result<Exact, Failure> {
    let target = from
        .zip(to)
        .and_then(|(from, to)| times(times(nominal, to)?, from.recip()));
    target.ok_or_else(too_many_digits)
}

/// The exact product in lowest terms, if it fits.
fn times(a: Exact, b: Exact) -> Option<Exact> {
    // Reduced crosswise, so that a product that fits is found to fit.
    let (left, right) = (
        Exact::new(*a.numer(), *b.denom()),
        Exact::new(*b.numer(), *a.denom()),
    );
    let numerator = left.numer().checked_mul(*right.numer())?;
    let denominator = left.denom().checked_mul(*right.denom())?;
    Some(Exact::new_raw(numerator, denominator))
}

/// The sink's rate with its drift, rounded to what 64 bits hold: it only tells how long the
/// headroom lasts.
fn true_rate(nominal: Ratio<u64>, drift: Drift) -> Result<Ratio<u64>, Failure> {
    let exact = Exact::new(u128::from(*nominal.numer()), u128::from(*nominal.denom()));
    let rate = drift
        .factor(0)
        .and_then(|factor| times(exact, factor))
        .ok_or_else(too_many_digits)?;
    let (mut numerator, mut denominator) = (*rate.numer(), *rate.denom());
    loop {
        match (u64::try_from(numerator), u64::try_from(denominator)) {
            (Ok(numerator), Ok(denominator)) => return Ok(Ratio::new(numerator, denominator)),
            _ => (numerator, denominator) = (numerator >> 1, (denominator >> 1).max(1)),
        }
    }
}
