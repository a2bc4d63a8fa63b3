//! How a crossing stands: does it hold, and if not, why.

use ratewright_ratio::{Bounds, target_from_f64};

use crate::policy::choose::View;
use crate::policy::realise::{allowed, bounds_for};
use crate::policy::{PLAN_HORIZON_S, RECOVERY_S};
use crate::{CrossingDeclaration, CrossingState, Realisation};

/// A state with its reason.
#[derive(Clone, Debug, PartialEq)]
pub(crate) struct Standing {
    pub(crate) state: CrossingState,
    /// In words and numbers.
    pub(crate) reason: String,
    /// Smallest bounds that would do, if these do not.
    pub(crate) needed: Option<Bounds>,
}

impl Standing {
    pub(crate) fn new(state: CrossingState, reason: String) -> Self {
        Standing {
            state,
            reason,
            needed: None,
        }
    }

    /// The bounds do not do, for this reason; what would is said with it.
    pub(crate) fn out_of_bounds(reason: &str, needed: Option<Bounds>) -> Self {
        let cure = needed.map_or_else(String::new, |needed| {
            let (l, m) = (needed.max_l(), needed.max_m());
            format!(": that would take L up to {l} and M up to {m}")
        });
        Standing {
            state: CrossingState::OutOfBounds,
            reason: format!("{reason}{cure}"),
            needed,
        }
    }
}

/// What is said of a crossing of which there is nothing else to say.
pub(crate) fn holds(declaration: &CrossingDeclaration) -> String {
    let headroom = declaration.headroom_samples;
    format!("the phase error stays within the headroom of {headroom} samples")
}

impl View<'_> {
    /// The smallest bounds within which what is run on average errs by less than the tube, at the
    /// target and as far from it as it takes to bring a phase error across the tube in time.
    pub(crate) fn needed(&self) -> Option<Bounds> {
        let tube = self.bare_limits().tube;
        let back = (tube / RECOVERY_S).min(self.bare_limits().pitch);
        let at = |velocity: f64| {
            let target = target_from_f64(self.outlook.ratio(velocity)).ok()?;
            bounds_for(&target, self.declaration, tube)
        };
        let (below, above) = (at(-back)?, at(back)?);
        let (l, m) = (
            below.max_l().max(above.max_l()),
            below.max_m().max(above.max_m()),
        );
        Bounds::new(l, m).ok()
    }

    /// How a crossing stands under a setting that may stay, which gives the phase error this
    /// velocity and errs by up to so much itself: holding, unless the phase error is out of the
    /// headroom by now, not known to be within, or has no way back when the hold ends.
    pub(crate) fn standing(&self, velocity: f64, own_error: f64) -> Standing {
        let degraded = |reason| Standing::new(CrossingState::Degraded, reason);
        let (phase, headroom) = (self.outlook.phase, self.declaration.headroom_samples);
        if phase.abs() > headroom {
            return degraded(format!(
                "the phase error of {phase:.3} samples is outside the headroom of {headroom}{}",
                if phase * velocity < 0.0 {
                    " and on its way back"
                } else {
                    ""
                }
            ));
        }
        let tube = self.bare_limits().tube;
        if own_error >= tube {
            let reason = format!(
                "what can be run within the bounds errs by up to {own_error:.3} samples itself, \
                 more than the {tube:.3} that the headroom of {headroom} leaves"
            );
            return Standing::out_of_bounds(&reason, self.needed());
        }
        if phase.abs() + own_error > headroom {
            return degraded(format!(
                "the phase error of {phase:.3} samples and what is run, which errs by up to {own_error:.3} \
                 itself, are more than the headroom of {headroom}"
            ));
        }
        let margin = self.outlook.margin(0.0);
        if margin > tube {
            return degraded(format!(
                "the phase error is uncertain by {margin:.3} samples, more than the {tube:.3} that planning \
                 may use of the headroom of {headroom}"
            ));
        }
        if let Some(standing) = self.dead_end(velocity) {
            return standing;
        }
        let reason = holds(self.declaration);
        Standing::new(CrossingState::Holding, reason)
    }

    /// For one ratio at a time: why there will be no way back, if so. No ratio of the bounds
    /// moves the phase error the other way, within the pitch limit, and that will be needed
    /// within what is planned for.
    fn dead_end(&self, velocity: f64) -> Option<Standing> {
        let limits = self.bare_limits();
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
        let reason = format!(
            "the phase error grows by {velocity:+.2e} samples a second, and no ratio within the bounds \
             leads back"
        );
        Some(Standing::out_of_bounds(&reason, other.bounds()))
    }
}
