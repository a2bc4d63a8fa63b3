//! Whether the setting in force may stay.

use crate::policy::outlook::Outlook;
use crate::policy::{INWARD_DEVIATIONS, Limits};

/// True if the ratio that gives the phase error `velocity` may stay in force until the decision
/// after next could have taken effect, `until_s` seconds from now:
/// the band stays in the tube; or the phase moves inward within the wider tube; or it is out of
/// the tube and moves inward briskly, without crossing the centre.
pub(crate) fn may_stay(
    outlook: &Outlook<'_>,
    limits: &Limits,
    velocity: f64,
    until_s: f64,
) -> bool {
    let now = outlook.phase;
    let then = outlook.extrapolate(now, velocity, until_s);
    if then.abs() + outlook.margin(until_s) <= limits.tube {
        return true;
    }
    let inward = then * velocity < 0.0 && then.abs() < now.abs();
    let within = now.abs() + INWARD_DEVIATIONS * outlook.deviation(0.0) <= limits.inward;
    let brisk = now.abs() > limits.tube && velocity.abs() > 0.4 * limits.pitch && then * now > 0.0;
    inward && (within || brisk)
}
