//! One pure function from a question to a plan, which the command line and the service both render.
//!
//! Units: ratios and residuals are dimensionless, headroom is in sink samples, rates in Hz, times in seconds.

use num_rational::Ratio;
use serde::{Deserialize, Serialize};

use crate::{Bounds, Cadence, Certificate, Exact, Fraction, Rung, best, ladder, residual};

/// What is to be planned.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Query {
    /// Sink rate over source rate, exact.
    pub target: Exact,
    /// What the filter bank takes.
    pub bounds: Bounds,
    /// The hard limit of the phase error, in sink samples, positive.
    pub headroom_samples: f64,
    /// The sink's true rate, Hz, if it is known.
    pub sink_rate_hz: Option<Ratio<u64>>,
}

/// The answer to a [`Query`].
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Plan {
    /// The target, in lowest terms.
    pub target: Exact,
    /// The nearest single ratio.
    pub best: Candidate,
    /// The trade-off of error against size, from the simplest ratio to the nearest.
    pub ladder: Vec<Rung>,
    /// Two ratios whose average is exactly the target; `None` if one ratio is exact, or if the target has
    /// no allowed ratio on one side, or a period beyond 2^60 blocks.
    pub cadence: Option<Cadence>,
}

/// A single ratio and what it does.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Candidate {
    /// The ratio L/M.
    pub ratio: Fraction,
    /// (L/M)/target − 1; positive makes too much output. 0.0 only if exact.
    pub residual: f64,
    /// Seconds until the phase error, from the centre, leaves the headroom; `None` if the ratio is exact or
    /// the sink rate is not known.
    pub seconds_to_slip: Option<f64>,
    /// Why it is the nearest.
    pub certificate: Certificate,
}

/// Plans a crossing for an exact, constant target.
///
/// # Examples
/// ```
/// use ratewright_ratio::{Bounds, Exact, Fraction, plan};
/// let query = plan::Query {
///     target: Exact::new(48_000, 44_100),
///     bounds: Bounds::new(256, 256)?,
///     headroom_samples: 1.0,
///     sink_rate_hz: Some(num_rational::Ratio::from_integer(48_000)),
/// };
/// let plan = plan::plan(&query);
/// assert_eq!(plan.best.ratio, Fraction::new(160, 147));
/// assert_eq!((plan.best.residual, plan.best.seconds_to_slip, plan.cadence), (0.0, None, None));
/// # Ok::<(), ratewright_ratio::BoundsError>(())
/// ```
pub fn plan(query: &Query) -> Plan {
    let target = query.target.reduced();
    let answer = best(&target, &query.bounds);
    let residual = residual(&answer.ratio, &target);
    let best = Candidate {
        ratio: answer.ratio,
        residual,
        seconds_to_slip: seconds_to_slip(residual, query.headroom_samples, query.sink_rate_hz),
        certificate: answer.certificate,
    };
    Plan {
        target,
        best,
        ladder: ladder(&target, &query.bounds),
        cadence: Cadence::new(&target, &query.bounds).ok(),
    }
}

/// The time a constant residual takes to use up the headroom: the phase error grows by
/// `f_sink·residual` sink samples a second, so `headroom / (f_sink·|residual|)` seconds.
///
/// # Examples
/// ```
/// use num_rational::Ratio;
/// use ratewright_ratio::plan::seconds_to_slip;
/// let studio = Some(Ratio::from_integer(50_000));
/// assert_eq!(seconds_to_slip(-0.5, 2.0, studio), Some(2.0 / 25_000.0));
/// assert_eq!(seconds_to_slip(0.0, 2.0, studio), None);
/// assert_eq!(seconds_to_slip(1e-6, 2.0, None), None);
/// ```
pub fn seconds_to_slip(
    residual: f64,
    headroom_samples: f64,
    sink_rate_hz: Option<Ratio<u64>>,
) -> Option<f64> {
    let rate = sink_rate_hz?;
    let rate_hz = *rate.numer() as f64 / *rate.denom() as f64;
    (residual != 0.0).then(|| headroom_samples / (rate_hz * residual.abs()))
}
