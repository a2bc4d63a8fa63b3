//! What a follower's levels tell of the error that the clocks' **present** phases have in an account.
//!
//! A level measures the whole phase error. What lasts of the account's uncertainty it sharpens for
//! good. What passes, the error P of the phases that the estimates show now, it tells as well, and
//! of the drifts with them; but that knowledge is overtaken by the readings, as P is.
//!
//! With W, C and D the variances and the covariance of P and of its velocity as the estimates have
//! them, over a step of h seconds without readings P grows by its velocity, C/W of P as far as P is
//! known; readings that bring W from W⁻ down to W⁺ leave ρ = W⁺/W⁻ of P, as an error is not
//! correlated with what it was corrected by. In a gap nothing is overtaken: levels then teach the
//! drift.
//!
//! P and what lasts are corrected as if they were independent, which is on the safe side: after a
//! level they are of opposite signs.

use ratewright_timing::Estimate;
use serde::{Deserialize, Serialize};

use crate::clocks::Traced;

/// Second moments of the error of the clocks' phases now and of its velocity, in sink samples and
/// seconds.
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(crate) struct Moments {
    /// Samples².
    pub(crate) phase: f64,
    /// Samples²/s.
    pub(crate) covariance: f64,
    /// Samples²/s².
    pub(crate) velocity: f64,
}

impl Moments {
    /// Of the two clocks of a crossing, whose errors are independent.
    pub(crate) fn of(source: &Traced, sink: &Traced, sink_hz: f64) -> Self {
        let measured = [source, sink].into_iter().filter(|clock| clock.measured);
        measured.fold(Moments::default(), |sum, clock| {
            let Estimate {
                deviation,
                phase_deviation_ns,
                phase_drift_covariance_ns,
                ..
            } = clock.estimate;
            let (phase, velocity) = (sink_hz * 1e-9 * phase_deviation_ns, sink_hz * deviation);
            Moments {
                phase: sum.phase + phase * phase,
                covariance: sum.covariance + sink_hz * sink_hz * 1e-9 * phase_drift_covariance_ns,
                velocity: sum.velocity + velocity * velocity,
            }
        })
    }

    /// Growth of the phase's variance in a time, by these.
    fn growth(&self, seconds: f64) -> f64 {
        seconds * (2.0 * self.covariance + seconds * self.velocity)
    }

    /// Velocity that goes with an error of the phase, 1/s.
    fn share(&self) -> f64 {
        if self.phase > 0.0 {
            self.covariance / self.phase
        } else {
            0.0
        }
    }
}

/// What levels have told, as of the account's last advance.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) struct Heard {
    /// Of the error, as the estimates have it.
    moments: Moments,
    /// What is to be added to the account, samples: the error, with the other sign.
    pub(crate) correction: f64,
    /// What is left of the error's variance, samples².
    pub(crate) variance: f64,
}

impl Heard {
    /// Nothing heard yet.
    pub(crate) fn begin(moments: Moments) -> Self {
        Heard {
            moments,
            correction: 0.0,
            variance: moments.phase,
        }
    }

    /// Goes on by so many seconds, after which the moments are these.
    pub(crate) fn advance(&mut self, seconds: f64, moments: Moments) {
        let before = self.moments.phase + self.moments.growth(seconds);
        let left = self.variance + self.left().growth(seconds);
        let grown = self.correction * (1.0 + self.moments.share() * seconds);
        let kept = (moments.phase / before).min(1.0);
        if kept < 1.0 {
            self.correction = kept * grown;
            self.variance = moments.phase - kept * kept * (before - left).max(0.0);
        } else {
            self.correction = if before > 0.0 { grown } else { 0.0 };
            self.variance = left + (moments.phase - before);
        }
        self.variance = self.variance.clamp(0.0, moments.phase);
        self.moments = moments;
    }

    /// A level that was off by `innovation` has weighed the error with this gain.
    pub(crate) fn correct(&mut self, gain: f64, innovation: f64) {
        self.correction += gain * innovation;
        self.variance *= 1.0 - gain;
    }

    /// What the velocity of the phase error has to be corrected by, samples/s.
    pub(crate) fn velocity(&self) -> f64 {
        self.moments.share() * self.correction
    }

    /// The moments as they are left.
    pub(crate) fn left(&self) -> Moments {
        let share = self.moments.share();
        let told = self.moments.phase - self.variance;
        Moments {
            phase: self.variance,
            covariance: share * self.variance,
            velocity: (self.moments.velocity - share * share * told).max(0.0),
        }
    }
}
