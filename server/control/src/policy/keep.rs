//! Whether the setting in force may stay.

use crate::policy::outlook::Outlook;
use crate::policy::{Limits, recovery_s};

/// True if the ratio that gives the phase error `velocity` may stay in force until the decision
/// after next could have taken effect, `until_s` seconds from now:
/// the band stays in the tube; or the phase error moves inward, and is in the tube itself or gets
/// there in time.
///
/// What moves inward is let be though its band is out of the tube: no other ratio makes a band
/// narrower. So a gap, in which nothing is learned while the band widens, changes nothing that was
/// right when it began, and a recovery runs as it was planned.
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
    let is_inward = then * velocity < 0.0 && then.abs() < now.abs();
    let out = (now.abs() - limits.tube).max(0.0);
    is_inward && out <= velocity.abs() * recovery_s(out, limits)
}
