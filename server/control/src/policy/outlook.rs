//! What is known of a crossing at an instant, and how it goes on from there.

use ratewright_ratio::Exact;
use ratewright_timing::Estimate;

use crate::clocks::Traced;
use crate::heard::Moments;
use crate::ledger::Ledger;
use crate::policy::{LASTING_DEVIATIONS, PASSING_DEVIATIONS};
use crate::signs;
use crate::target::Target;

/// Phase error, target and their uncertainty, from now on. Sink samples and seconds.
#[derive(Clone, Debug)]
pub(crate) struct Outlook<'a> {
    pub(crate) target: Target,
    /// True sink rate as estimated, Hz.
    pub(crate) sink_hz: f64,
    /// Phase error now.
    pub(crate) phase: f64,
    /// Its variance now.
    pub(crate) phase_variance: f64,
    /// Growth of the velocity, samples/s²: the target moves away under a held ratio.
    pub(crate) acceleration: f64,
    /// The part of it that no later reading takes away.
    lasting_variance: f64,
    clocks: [&'a Estimate; 2],
    /// Covariance of phase and velocity, samples²/s.
    covariance: f64,
    /// What levels have told of the velocity, samples/s, and by how much they have made it more
    /// certain, samples²/s².
    heard_velocity: f64,
    heard_variance: f64,
}

impl<'a> Outlook<'a> {
    /// From an account that is advanced to now, and the estimates of now.
    pub(crate) fn new(
        ledger: &Ledger,
        target: Target,
        source: &'a Traced,
        sink: &'a Traced,
    ) -> Self {
        let clocks = [&source.estimate, &sink.estimate];
        let sink_hz = signs::true_rate(target.nominal_sink_hz, sink.estimate.drift);
        let moments = Moments::of(source, sink, target.nominal_sink_hz);
        let left = ledger.heard().map_or(moments, |heard| heard.left);
        Outlook {
            sink_hz,
            phase: ledger.phase_samples(),
            phase_variance: ledger.variance(),
            lasting_variance: ledger.lasting_variance(),
            acceleration: -sink_hz * (clocks[1].drift_rate_per_s - clocks[0].drift_rate_per_s),
            clocks,
            covariance: left.covariance,
            heard_velocity: ledger.heard().map_or(0.0, |heard| heard.velocity),
            heard_variance: moments.velocity - left.velocity,
            target,
        }
    }

    /// Velocity of the phase error under a ratio, samples/s.
    pub(crate) fn velocity(&self, ratio: f64) -> f64 {
        self.sink_hz * signs::residual(ratio, self.target.value) + self.heard_velocity
    }

    /// The ratio that gives the phase error a velocity, samples/s.
    pub(crate) fn ratio(&self, velocity: f64) -> f64 {
        self.target.value * (1.0 + (velocity - self.heard_velocity) / self.sink_hz)
    }

    /// Phase error in `tau_s` seconds, if it has `phase` at first and the velocity `velocity`.
    pub(crate) fn extrapolate(&self, phase: f64, velocity: f64, tau_s: f64) -> f64 {
        phase + velocity * tau_s + self.acceleration * tau_s * tau_s / 2.0
    }

    /// Standard deviation of the phase error `tau_s` seconds from now, under any ratio that is
    /// known by then.
    pub(crate) fn deviation(&self, tau_s: f64) -> f64 {
        let growth: f64 = self
            .clocks
            .iter()
            .map(|clock| clock.predict_variance(tau_s))
            .sum();
        let of_drifts = self.sink_hz * self.sink_hz * growth;
        let of_velocity = (of_drifts - self.heard_variance * tau_s * tau_s).max(0.0);
        let both = 2.0 * self.covariance * tau_s;
        (self.phase_variance + both + of_velocity).max(0.0).sqrt()
    }

    /// What planning and keeping leave room for, `tau_s` seconds from now.
    pub(crate) fn margin(&self, tau_s: f64) -> f64 {
        let deviation = self.deviation(tau_s);
        let passing = (deviation * deviation - self.lasting_variance).max(0.0);
        let squares = LASTING_DEVIATIONS * LASTING_DEVIATIONS * self.lasting_variance
            + PASSING_DEVIATIONS * PASSING_DEVIATIONS * passing;
        squares.sqrt()
    }

    /// Standard deviation of the velocity now, samples/s.
    pub(crate) fn velocity_deviation(&self) -> f64 {
        let variance: f64 = self.clocks.iter().map(|c| c.deviation * c.deviation).sum();
        let of_drifts = self.sink_hz * self.sink_hz * variance;
        (of_drifts - self.heard_variance).max(0.0).sqrt()
    }

    /// The target, exactly.
    pub(crate) fn exact_target(&self) -> &Exact {
        &self.target.exact
    }
}
