//! The forecast: when will the buffer slip?

use crate::SLIP_HORIZON_S;
use crate::policy::outlook::Outlook;

/// Two-sided 95 % quantile of the normal distribution.
const Z95: f64 = 1.959_963_984_540_054;
/// First step of the search, seconds, and the factor from step to step.
const STEPS: (f64, f64) = (0.01, 1.2);

/// Seconds until the 95 % band of the phase error first leaves `room` (headroom less a cadence's
/// own error), or `None` if that is not within [`SLIP_HORIZON_S`].
///
/// The band τ seconds from `delay_s` on is `phase + velocity·τ + acceleration·τ²/2 ± 1.96·σ`,
/// σ the deviation `delay_s + τ` seconds from now. The first step of a geometric grid (0.01 s,
/// then a fifth longer each) at which it is out brackets the instant, which bisection refines to
/// a part in 10⁶; an excursion within one step is not seen.
pub(crate) fn seconds_to_slip(
    outlook: &Outlook<'_>,
    room: f64,
    (phase, velocity): (f64, f64),
    delay_s: f64,
) -> Option<f64> {
    first_out(|tau_s| {
        let middle = outlook.extrapolate(phase, velocity, tau_s);
        middle.abs() + Z95 * outlook.deviation(delay_s + tau_s) >= room
    })
}

/// Seconds until the phase error can no longer be vouched for if no reading comes: the band's half-width
/// alone, around a middle that settings keep at 0, is as wide as `room`. `None` if that is not within
/// [`SLIP_HORIZON_S`].
pub(crate) fn seconds_vouched(outlook: &Outlook<'_>, room: f64) -> Option<f64> {
    first_out(|tau_s| Z95 * outlook.deviation(tau_s) >= room)
}

/// The first instant at which `out_at` holds, seconds.
fn first_out(out_at: impl Fn(f64) -> bool) -> Option<f64> {
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
