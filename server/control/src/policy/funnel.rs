//! The funnel: which velocities keep the phase error's band in the tube, for how long.

use crate::policy::outlook::Outlook;
use crate::policy::{Limits, PLAN_HORIZON_S, recovery_s};

/// Each step of the hold is so much longer than the one before.
const GROWTH: f64 = 1.02;

/// Velocities from `low` to `high` samples/s keep the band in the tube for `hold_s` seconds.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(crate) struct Span {
    pub(crate) hold_s: f64,
    pub(crate) low: f64,
    pub(crate) high: f64,
}

/// Where the phase error will be when a new setting takes effect.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(crate) struct Entry {
    /// Seconds from now to the effect.
    pub(crate) lead_s: f64,
    /// Phase error then.
    pub(crate) phase: f64,
    /// By how much its band is out of the tube then, and must be recovered.
    pub(crate) excess: f64,
}

impl Entry {
    /// Under the ratio in force, which gives the phase error `velocity`.
    pub(crate) fn new(outlook: &Outlook<'_>, limits: &Limits, lead_s: f64, velocity: f64) -> Self {
        let phase = outlook.extrapolate(outlook.phase, velocity, lead_s);
        let band = phase.abs() + outlook.margin(lead_s);
        Entry {
            lead_s,
            phase,
            excess: (band - limits.tube).max(0.0),
        }
    }
}

/// One pass over growing holds: the slopes that stay in the tube up to each, nested, longest last.
/// Empty if not even the shortest can be vouched for.
///
/// `step_s`: seconds to the next decision.
pub(crate) fn funnel(
    outlook: &Outlook<'_>,
    limits: &Limits,
    entry: Entry,
    step_s: f64,
) -> Vec<Span> {
    let Entry {
        lead_s,
        phase,
        excess,
    } = entry;
    let recovery_s = recovery_s(excess, limits);
    let (mut low, mut high) = (-limits.pitch, limits.pitch);
    let mut spans = Vec::new();
    let mut hold_s = step_s.min(2.0);
    while hold_s <= PLAN_HORIZON_S {
        let tau_s = lead_s + hold_s;
        let still_out = excess * (1.0 - hold_s / recovery_s).max(0.0);
        let half_width = limits.tube + still_out - outlook.margin(tau_s);
        let centre = outlook.extrapolate(phase, 0.0, hold_s);
        low = low.max((-half_width - centre) / hold_s);
        high = high.min((half_width - centre) / hold_s);
        if half_width <= 0.0 || low > high {
            break;
        }
        spans.push(Span { hold_s, low, high });
        hold_s *= GROWTH;
    }
    spans
}
