//! What a follower's levels tell of the error that the clocks' **present** phases have in an account.
//!
//! A level measures the whole phase error. What lasts of the account's uncertainty it sharpens for
//! good. What passes, the error of the phases that the estimates show now, it tells as well, and the
//! error of the drifts with it; but that knowledge is overtaken by the readings, as those errors are.
//!
//! Let M be the covariance of the errors of the phase, P, and of its velocity, V, as the estimates have
//! it, and L what levels have left of it. Without readings P grows by V, and V walks as fast as its
//! variance in M has ever grown in this gap: levels teach the drift then. Readings that bring the variance of P from
//! W⁻ down to W⁺ leave ρ = W⁺/W⁻ of P, as an error is not correlated with what it was corrected by;
//! of V they leave what goes with that P.
//!
//! P and what lasts are corrected as if they were independent, which is on the safe side: after a
//! level they are of opposite signs.

use ratewright_timing::{Estimate, State};
use serde::{Deserialize, Serialize};

use crate::clocks::Traced;

/// Covariance of the errors of the clocks' phases now and of their velocity, in sink samples and
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
            let most = phase * velocity;
            let covariance = sink_hz * sink_hz * 1e-9 * phase_drift_covariance_ns;
            Moments {
                phase: sum.phase + phase * phase,
                covariance: sum.covariance + covariance.clamp(-most, most),
                velocity: sum.velocity + velocity * velocity,
            }
        })
    }

    /// FMFᵀ.
    fn after(&self, seconds: f64) -> Self {
        let carried = self.covariance + self.velocity * seconds;
        Moments {
            phase: self.phase + seconds * (self.covariance + carried),
            covariance: carried,
            velocity: self.velocity,
        }
    }

    /// The velocity has walked besides.
    fn and_walk(&self, walk: f64, seconds: f64) -> Self {
        let gained = walk * seconds;
        Moments {
            phase: self.phase + gained * seconds * seconds / 3.0,
            covariance: self.covariance + gained * seconds / 2.0,
            velocity: self.velocity + gained,
        }
    }

    /// If of the phase's error only so much is left: what is left of both.
    fn told_of_phase(&self, left: f64) -> Self {
        let share = self.share();
        Moments {
            phase: left,
            covariance: share * left,
            velocity: self.velocity - share * share * (self.phase - left),
        }
    }

    /// Velocity that goes with an error of the phase, 1/s.
    fn share(&self) -> f64 {
        if self.phase > 0.0 {
            self.covariance / self.phase
        } else {
            0.0
        }
    }

    /// The nearest to it that is a covariance and no larger than another one.
    fn within(&self, most: &Moments) -> Self {
        let phase = self.phase.clamp(0.0, most.phase);
        let velocity = self.velocity.clamp(0.0, most.velocity);
        let largest = (phase * velocity).sqrt();
        Moments {
            phase,
            covariance: self.covariance.clamp(-largest, largest),
            velocity,
        }
    }
}

/// Random walk of a velocity that only levels tell, samples²/s³ at 48 kHz: 10⁻⁸/√s, a poor crystal
/// (own choice).
const CONTRADICTED_WALK: f64 = 2.3e-7;
/// The readings are believed again once what levels teach of the velocity is as near to them as so
/// many standard deviations.
const BELIEVED: f64 = 2.0;

/// What levels have told, as of the account's last advance.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) struct Heard {
    /// Of the errors, as the estimates have it.
    moments: Moments,
    /// What is left of that.
    pub(crate) left: Moments,
    /// What is to be added to the phase of the account, samples.
    pub(crate) phase: f64,
    /// What is to be added to its velocity, samples/s.
    pub(crate) velocity: f64,
    /// Random walk of the velocity in this gap, samples²/s³.
    walk: f64,
    /// Levels speak against the readings: they alone are believed.
    pub(crate) is_contradicted: bool,
}

impl Heard {
    /// Nothing heard yet.
    pub(crate) fn begin(moments: Moments) -> Self {
        Heard {
            moments,
            left: moments,
            phase: 0.0,
            velocity: 0.0,
            walk: 0.0,
            is_contradicted: false,
        }
    }

    /// Levels show that the velocity is off by so much, and the phase by so much; each by this
    /// variance, in so many seconds.
    pub(crate) fn contradict(&mut self, phase: f64, velocity: f64, variance: f64, seconds: f64) {
        self.phase += phase;
        self.velocity += velocity;
        self.left = Moments {
            phase: variance,
            covariance: variance / seconds,
            velocity: 2.0 * variance / (seconds * seconds),
        };
        self.walk = CONTRADICTED_WALK;
        self.is_contradicted = true;
    }

    /// What is left when the phase begins anew: that the readings are not to be believed.
    pub(crate) fn centred(mut self: Box<Self>) -> Option<Box<Self>> {
        self.phase = 0.0;
        (self.left.phase, self.left.covariance) = (0.0, 0.0);
        Some(self).filter(|heard| heard.is_contradicted)
    }

    /// True if what levels teach of the velocity is no news.
    fn is_no_news(&self) -> bool {
        let variance = self.left.velocity + self.moments.velocity;
        self.velocity * self.velocity <= BELIEVED * BELIEVED * variance
    }

    /// Goes on by so many seconds, after which the moments are these; `in_gap` if one of the clocks is
    /// not read.
    pub(crate) fn advance(&mut self, seconds: f64, moments: Moments, in_gap: bool) {
        let before = self.moments.after(seconds);
        let left = self.left.after(seconds);
        self.phase += self.velocity * seconds;
        if self.is_contradicted {
            self.left = left.and_walk(self.walk, seconds);
            self.moments = moments;
            return;
        }
        self.left = if moments.phase < before.phase && !in_gap {
            let kept = moments.phase / before.phase;
            self.phase *= kept;
            self.velocity = moments.share() * self.phase;
            self.walk = 0.0;
            let told = kept * kept * (before.phase - left.phase);
            moments.told_of_phase(moments.phase - told)
        } else {
            let grown = (moments.velocity - before.velocity) / seconds;
            self.walk = self.walk.max(grown);
            left.and_walk(self.walk, seconds)
        };
        self.left = self.left.within(&moments);
        self.moments = moments;
    }

    /// A level was off by `innovation`, whose variance is `whole`, samples².
    pub(crate) fn correct(&mut self, innovation: f64, whole: f64) {
        let left = self.left;
        let (of_phase, of_velocity) = (left.phase / whole, left.covariance / whole);
        self.phase += of_phase * innovation;
        self.velocity += of_velocity * innovation;
        self.left = Moments {
            phase: left.phase - of_phase * left.phase,
            covariance: left.covariance - of_phase * left.covariance,
            velocity: left.velocity - of_velocity * left.covariance,
        };
        if self.is_contradicted && self.is_no_news() {
            self.is_contradicted = false;
            self.left = self.left.within(&self.moments);
        }
    }

    /// Whether a clock of the two is not read now.
    pub(crate) fn in_gap(source: &Traced, sink: &Traced) -> bool {
        [source, sink]
            .iter()
            .any(|clock| clock.estimate.state == State::Holdover)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    const STEADY: Moments = Moments {
        phase: 0.04,
        covariance: 0.75 * 0.2 * 0.002,
        velocity: 4e-6,
    };

    #[test]
    fn readings_overtake_what_levels_have_told() {
        let mut heard = Heard::begin(STEADY);
        heard.correct(0.3, 0.04 + 0.01);
        assert!((heard.phase - 0.8 * 0.3).abs() < 1e-12);
        assert!((heard.left.phase - 0.2 * 0.04).abs() < 1e-12);
        // An hour of readings that keep the estimates as good as they were.
        (0..360).for_each(|_| heard.advance(10.0, STEADY, false));
        assert!(
            heard.phase.abs() < 1e-3 && heard.velocity.abs() < 1e-5,
            "{heard:?}"
        );
        assert!(
            (heard.left.phase / STEADY.phase - 1.0).abs() < 1e-3,
            "{heard:?}"
        );
    }

    #[test]
    fn in_a_gap_levels_teach_the_velocity() {
        // A drift that is wrong by 0.004 samples/s, known to within 0.002; exact levels.
        let (mut heard, mut moments) = (Heard::begin(STEADY), STEADY);
        for minute in 1..=10 {
            moments = moments.after(60.0);
            heard.advance(60.0, moments, true);
            let innovation = 0.004 * 60.0 * f64::from(minute) - heard.phase;
            heard.correct(innovation, heard.left.phase + 1e-6);
        }
        assert!((heard.velocity - 0.004).abs() < 2e-4, "{heard:?}");
        assert!(heard.left.velocity < 0.01 * moments.velocity, "{heard:?}");
        // So the account goes on as it truly does.
        heard.advance(600.0, moments.after(600.0), true);
        assert!((heard.phase - 0.004 * 1200.0).abs() < 0.1, "{heard:?}");
    }
}
