//! Several probes of one clock made into one estimate.

use crate::estimate::{Estimate, State};

/// Correlation of the errors of two links to the same clock: both lag behind the same wander.
/// In the steady state of two alike filters of white phase noise and a random walk of the
/// drift, no combination can be better than one filter with half the noise, whose variance is
/// 2^(−1/4) of either's; so the correlation is at least 2^(3/4) − 1.
const CORRELATION: f64 = 0.681_792_830_507_429;

/// Estimates of the same clock against the same reference, by different links, as one.
///
/// Each counts by its variance; the errors are taken as correlated, since all lag behind the
/// same wander, and where the estimates contradict each other beyond their variances the
/// interval is widened by as much. The phase is that of the narrowest. None when there are no
/// estimates.
///
/// ```
/// use ratewright_timing::{combine, exact};
/// let mut a = exact(0);
/// (a.drift, a.deviation, a.low, a.high) = (1.0e-6, 1e-8, 0.98e-6, 1.02e-6);
/// a.last_reading_ns = Some(0);
/// let b = a.clone();
/// let both = combine(&[a.clone(), b]).unwrap();
/// assert_eq!(both.drift, a.drift);
/// assert!(both.deviation < a.deviation && both.deviation > 0.9 * a.deviation);
/// ```
pub fn combine(estimates: &[Estimate]) -> Option<Estimate> {
    let usable = || {
        estimates
            .iter()
            .filter(|e| e.last_reading_ns.is_some() || e.deviation == 0.0)
    };
    let narrowest = |a: &&Estimate, b: &&Estimate| a.half_width().total_cmp(&b.half_width());
    let best = usable()
        .min_by(narrowest)
        .or(estimates.iter().min_by(narrowest))?;
    // What is far wider than the best could only spoil it.
    let kept = || usable().filter(|e| CORRELATION * e.deviation <= best.deviation);
    let weight = |e: &Estimate| 1.0 / (e.deviation * e.deviation);
    let total: f64 = kept().map(weight).sum();
    if kept().count() < 2 || !total.is_finite() {
        return Some(best.clone());
    }
    let drift = kept().map(|e| weight(e) * e.drift).sum::<f64>() / total;
    let slope = kept().map(|e| weight(e) * e.drift_rate_per_s).sum::<f64>() / total;
    // With weights w and deviations σ, variance = (1 − ρ)Σ(wσ)² + ρ(Σwσ)².
    let alone: f64 = kept().map(weight).sum::<f64>() / (total * total);
    let together = kept().map(|e| 1.0 / e.deviation).sum::<f64>() / total;
    let variance = (1.0 - CORRELATION) * alone + CORRELATION * together * together;
    let apart: f64 = kept()
        .map(|e| weight(e) * (e.drift - drift) * (e.drift - drift))
        .sum();
    let contradiction = (apart / (kept().count() - 1) as f64).max(1.0);
    let deviation = (variance * contradiction).sqrt();
    let half_width = best.half_width() / best.deviation * deviation;
    let newest = usable().filter_map(|e| e.last_reading_ns).max();
    Some(Estimate {
        drift,
        deviation,
        low: drift - half_width,
        high: drift + half_width,
        drift_rate_per_s: slope,
        phase_drift_covariance_ns: best.phase_drift_covariance_ns * deviation / best.deviation,
        last_reading_ns: newest,
        rows_used: estimates.iter().map(|e| e.rows_used).sum(),
        outliers: estimates.iter().map(|e| e.outliers).sum(),
        state: best_state(best, contradiction),
        ..best.clone()
    })
}

/// A lock that another probe contradicts is none.
fn best_state(best: &Estimate, contradiction: f64) -> State {
    if contradiction > 4.0 {
        best.state.worse(State::Acquiring)
    } else {
        best.state
    }
}
