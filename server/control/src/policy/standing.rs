//! How a crossing stands: does it hold, and if not, why.

use crate::policy::choose::View;
use crate::policy::realise::allowed;
use crate::policy::{MARGIN_DEVIATIONS, PLAN_HORIZON_S};
use crate::{CrossingState, Realisation};

impl View<'_> {
    /// How a crossing stands under a setting that may stay, which gives the phase error this
    /// velocity and errs by up to so much itself: holding, unless the phase error is out of the
    /// headroom by now, not known to be within, or has no way back when the hold ends.
    pub(crate) fn standing(&self, velocity: f64, cadence_error: f64) -> (CrossingState, String) {
        let (phase, headroom) = (self.outlook.phase, self.declaration.headroom_samples);
        if phase.abs() > headroom {
            let reason = format!(
                "the phase error of {phase:.3} samples is outside the headroom of {headroom} \
                 and on its way back"
            );
            return (CrossingState::Degraded, reason);
        }
        let tube = self.limits(0.0).tube;
        if cadence_error >= tube {
            let reason = format!(
                "a cadence within the bounds errs by up to {cadence_error:.3} samples, \
                 more than the {tube:.3} that the headroom of {headroom} leaves"
            );
            return (CrossingState::Degraded, reason);
        }
        let margin = MARGIN_DEVIATIONS * self.outlook.deviation(0.0);
        if margin > tube {
            let reason = format!(
                "the phase error is uncertain by {margin:.3} samples ({MARGIN_DEVIATIONS} deviations), \
                 and the tube is {tube:.3}"
            );
            return (CrossingState::Degraded, reason);
        }
        if let Some(reason) = self.dead_end(velocity) {
            return (CrossingState::OutOfBounds, reason);
        }
        let reason = format!("the phase error stays within the headroom of {headroom} samples");
        (CrossingState::Holding, reason)
    }

    /// For one ratio at a time: why there will be no way back, if so. No ratio of the bounds
    /// moves the phase error the other way, within the pitch limit, and that will be needed
    /// within what is planned for.
    fn dead_end(&self, velocity: f64) -> Option<String> {
        let limits = self.limits(0.0);
        let lasts = velocity.abs() * PLAN_HORIZON_S < limits.tube;
        if self.declaration.realisation != Realisation::Single || lasts {
            return None;
        }
        let (low, high) = if velocity > 0.0 {
            (-limits.pitch, 0.0)
        } else {
            (0.0, limits.pitch)
        };
        let other = allowed(self.outlook.ratio(low), self.outlook.ratio(high))?;
        if other.any_single(&self.declaration.bounds).is_some() {
            return None;
        }
        // The simplest fraction has the smallest parts of all that would do.
        let (l, m) = (other.simplest.numer(), other.simplest.denom());
        Some(format!(
            "the phase error grows by {velocity:+.2e} samples a second, and no ratio within the bounds \
             leads back: that would take L up to {l} and M up to {m}, or a cadence"
        ))
    }
}
