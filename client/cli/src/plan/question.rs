//! From what was typed to what is asked of the ratio crate.

use num_rational::Ratio;
use ratewright_ratio::plan::{Plan, Query, seconds_to_slip};
use ratewright_ratio::{Bounds, Exact, Fraction, Interval, residual, simplest, target_from_rates};

use super::Arguments;
use super::drift::Drift;
use crate::failure::Failure;

/// A question, as the ratio crate takes it and as it was put.
#[derive(Debug)]
pub(crate) struct Question {
    pub(crate) query: Query,
    /// Source and sink rate, if the question was put by rates.
    pub(crate) rates: Option<(Ratio<u64>, Ratio<u64>)>,
    pub(crate) from_drift: Drift,
    pub(crate) to_drift: Drift,
    /// The targets at the ends of the drifts' intervals, if they have any.
    interval: Option<Interval>,
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

impl Question {
    pub(crate) fn new(arguments: &Arguments) -> Result<Self, Failure> {
        let usage = |error: &dyn std::fmt::Display| Failure::Usage(error.to_string());
        let mut bounds = Bounds::new(arguments.max_l, arguments.max_m)
            .map_err(|error| usage(&with_dashes(&error.to_string())))?;
        if let Some(prime) = arguments.largest_prime {
            let bounded = bounds.with_largest_prime(prime);
            bounds = bounded.map_err(|error| usage(&with_dashes(&error.to_string())))?;
        }
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
        let headroom_samples = arguments.headroom;
        let query = Query {
            target,
            bounds,
            headroom_samples,
            sink_rate_hz,
            filter: None,
        };
        Ok(Self {
            query,
            rates,
            from_drift,
            to_drift,
            interval,
        })
    }

    /// What the intervals mean for this plan; `None` if there are none.
    pub(crate) fn width(&self, plan: &Plan) -> Option<Width> {
        let interval = self.interval.as_ref()?;
        let (low, high) = (*interval.lo(), *interval.hi());
        let residuals = [low, high].map(|end| residual(&plan.best.ratio, &end).abs());
        let worst = residuals[0].max(residuals[1]);
        Some(Width {
            low,
            high,
            simplest: simplest(interval).map(|answer| answer.fraction),
            seconds_to_slip_at_worst: seconds_to_slip(
                worst,
                self.query.headroom_samples,
                self.query.sink_rate_hz,
            ),
        })
    }
}

/// Field names as options are typed.
fn with_dashes(text: &str) -> String {
    ["max_l", "max_m", "largest_prime"]
        .iter()
        .fold(text.to_owned(), |text, field| {
            text.replace(field, &format!("--{}", field.replace('_', "-")))
        })
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
