//! The forecast: when will the buffer slip?

use crate::SLIP_HORIZON_S;
use crate::policy::outlook::Outlook;

/// Two-sided 95 % quantile of the normal distribution.
const Z95: f64 = 1.959_963_984_540_054;
/// First step of the search, seconds, and the factor from step to step.
const STEPS: (f64, f64) = (0.01, 1.1);

/// Seconds until the 95 % band of the phase error first leaves `room` (headroom less a cadence's
/// own error), or `None` if that is not within [`SLIP_HORIZON_S`].
///
/// The band τ seconds from `delay_s` on is `phase + velocity·τ + acceleration·τ²/2 ± 1.96·σ`,
/// σ the deviation `delay_s + τ` seconds from now. The first step of a geometric grid (0.01 s,
/// then a tenth longer each) at which it is out brackets the instant, which bisection refines to
/// a part in 10⁶; an excursion within one step is not seen.
pub(crate) fn seconds_to_slip(
    outlook: &Outlook<'_>,
    room: f64,
    (phase, velocity): (f64, f64),
    delay_s: f64,
) -> Option<f64> {
    let out_at = |tau_s: f64| {
        let middle = outlook.extrapolate(phase, velocity, tau_s);
        middle.abs() + Z95 * outlook.deviation(delay_s + tau_s) >= room
    };
    if out_at(0.0) {
        return Some(0.0);
    }
    let (mut inside, mut tau_s) = (0.0, STEPS.0);
    while !out_at(tau_s) {
        if tau_s >= SLIP_HORIZON_S {
            return None;
        }
        (inside, tau_s) = (tau_s, (tau_s * STEPS.1).min(SLIP_HORIZON_S));
    }
    while tau_s - inside > 1e-6 * tau_s {
        let middle = (inside + tau_s) / 2.0;
        if out_at(middle) {
            tau_s = middle
        } else {
            inside = middle
        }
    }
    Some(tau_s)
}
