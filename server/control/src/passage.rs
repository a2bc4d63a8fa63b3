//! How much clock time a clock has gained on house time since a crossing was centred.
//!
//! Two accounts are at hand. The estimator's **phase** is measured: its increments are as good as
//! the readings, however the drift wandered between them, but the first one hangs on how well the
//! phase was known at the beginning. The present **drift run backwards**, ŷ·t − ḋ·t²/2, knows
//! nothing of wander, but early on it is far better than what was known at the beginning. The
//! account with the smaller variance is kept; changing from increments to the backward run
//! revises the past.
//!
//! While a link is young its phase still moves with what is learned of its noise, by more than its
//! deviation says: until it has settled the past is always run backwards.
//!
//! When the phase begins anew (another link, a restart), a leg is closed with its variance and
//! another one opened.

use ratewright_timing::Estimate;
use serde::{Deserialize, Serialize};

use crate::HouseNs;
use crate::clocks::PHASE_DRIFT_CORRELATION;
use crate::clocks::Traced;
use crate::link::{Lineage, Restart};

/// The past is revised only for a real gain in certainty: each revision is a jump.
const WORTH_REVISING: f64 = 0.9;
/// A restart is found within minutes; one longer ago is that of a link not looked at then, ns.
const LONGEST_DOUBT_NS: i64 = 600_000_000_000;
/// Seconds in a nanosecond.
const SECONDS: f64 = 1e-9;

/// Time gained by one clock, in legs.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) struct Passage {
    /// Variance of the legs that are closed, ns².
    closed_variance_ns2: f64,
    /// Beginning of the open leg.
    from_ns: HouseNs,
    /// Time gained in the open leg, ns.
    gained_ns: f64,
    /// Variance of the phase at the beginning of the open leg, ns².
    entry_variance_ns2: f64,
    /// Variance of the phase now, ns².
    phase_variance_ns2: f64,
    /// Phase at the last advance, and the links it came by; none while nothing is measured.
    last: Option<(Lineage, f64)>,
    /// Drift at the last advance.
    drift: f64,
    /// What is not known of the beginning of the open leg.
    doubt: Option<Box<Doubt>>,
}

/// The drift changed somewhere within a span, from this one to that of the open leg.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
struct Doubt {
    drift: f64,
    span_ns: f64,
}

impl Passage {
    /// Nothing gained yet.
    pub(crate) fn begin(from_ns: HouseNs) -> Self {
        Passage {
            closed_variance_ns2: 0.0,
            from_ns,
            gained_ns: 0.0,
            entry_variance_ns2: 0.0,
            phase_variance_ns2: 0.0,
            last: None,
            drift: 0.0,
            doubt: None,
        }
    }

    /// Goes on from `at_ns`, the last advance, to `now`, at which `clock` is the estimate.
    /// Gives what the account gains, ns: the time gained since then, and revisions of the past.
    pub(crate) fn advance(&mut self, at_ns: HouseNs, now: HouseNs, clock: &Traced) -> f64 {
        let begins_anew = |(lineage, _)| !clock.measured || lineage != clock.lineage;
        let before_ns = if self.last.is_some_and(begins_anew) {
            self.close_leg(at_ns, clock.restart)
        } else {
            self.gained_ns
        };
        let estimate = &clock.estimate;
        let span_s = (now - self.from_ns) as f64 * SECONDS;
        let deviation_ns = if clock.measured {
            estimate.phase_deviation_ns
        } else {
            0.0
        };
        self.phase_variance_ns2 = deviation_ns * deviation_ns;
        let backward_variance = backward_variance_ns2(estimate, deviation_ns, span_s);
        match self.last {
            Some((_, phase_ns))
                if clock.settled
                    && backward_variance > WORTH_REVISING * self.entry_variance_ns2 =>
            {
                self.gained_ns += estimate.phase_ns - phase_ns;
            }
            _ => {
                let mean_drift = estimate.drift - estimate.drift_rate_per_s * span_s / 2.0;
                self.gained_ns = mean_drift * span_s / SECONDS;
                self.entry_variance_ns2 = backward_variance;
            }
        }
        self.drift = estimate.drift;
        self.last = clock.measured.then_some((clock.lineage, estimate.phase_ns));
        self.gained_ns - before_ns
    }

    /// Closes the leg at the last advance, or where readings fitted last if they have made the
    /// estimator begin anew since: what it foretold from there on was wrong, as is known now.
    /// Gives how much of the account is taken back, ns.
    fn close_leg(&mut self, at_ns: HouseNs, restart: Option<Restart>) -> f64 {
        let restart = restart.filter(|restart| {
            let ago_ns = at_ns - restart.fitted_ns;
            restart.fitted_ns >= self.from_ns && (0..LONGEST_DOUBT_NS).contains(&ago_ns)
        });
        let end_ns = restart.map_or(at_ns, |restart| restart.fitted_ns);
        let taken_back_ns = self.drift * (at_ns - end_ns) as f64;
        *self = Passage {
            closed_variance_ns2: self.variance_ns2(),
            doubt: restart.map(|restart| {
                Box::new(Doubt {
                    drift: self.drift,
                    span_ns: (restart.unfit_ns - restart.fitted_ns) as f64,
                })
            }),
            ..Passage::begin(end_ns)
        };
        taken_back_ns
    }

    /// Another clock goes on from `now`: what was gained stays as uncertain as it is.
    pub(crate) fn hand_over(&mut self, now: HouseNs) {
        *self = Passage {
            closed_variance_ns2: self.variance_ns2(),
            ..Passage::begin(now)
        };
    }

    /// Variance of a change of drift at an unknown instant within a span: uniform, ns².
    fn doubt_variance_ns2(&self) -> f64 {
        self.doubt.as_deref().map_or(0.0, |doubt| {
            let most_ns = (self.drift - doubt.drift) * doubt.span_ns;
            most_ns * most_ns / 3.0
        })
    }

    /// Variance of the time gained since the beginning, ns².
    pub(crate) fn variance_ns2(&self) -> f64 {
        self.lasting_variance_ns2() + self.phase_variance_ns2
    }

    /// The part of the variance that later readings take away, ns².
    pub(crate) fn passing_variance_ns2(&self) -> f64 {
        self.phase_variance_ns2
    }

    /// Beginning of the open leg.
    pub(crate) fn begins_ns(&self) -> HouseNs {
        self.from_ns
    }

    /// The part of the variance that later readings do not take away, ns².
    pub(crate) fn lasting_variance_ns2(&self) -> f64 {
        self.closed_variance_ns2 + self.entry_variance_ns2 + self.doubt_variance_ns2()
    }

    /// Something else has made the account more certain: its lasting variance falls by a factor.
    pub(crate) fn sharpen(&mut self, factor: f64) {
        self.closed_variance_ns2 *= factor;
        self.entry_variance_ns2 *= factor;
        if let Some(doubt) = &mut self.doubt {
            doubt.span_ns *= factor.sqrt();
        }
    }
}

/// Variance of the phase at the beginning of a span, run backwards from now with the drift, ns².
fn backward_variance_ns2(estimate: &Estimate, deviation_ns: f64, span_s: f64) -> f64 {
    let by_drift_ns = estimate.deviation * span_s / SECONDS;
    let covariance = PHASE_DRIFT_CORRELATION * deviation_ns * by_drift_ns;
    let grown = estimate.predict_variance(span_s) / (SECONDS * SECONDS);
    // In a gap the two are not of one piece; no drift could tell more than the correlation does.
    let least = 1.0 - PHASE_DRIFT_CORRELATION * PHASE_DRIFT_CORRELATION;
    let variance = deviation_ns * deviation_ns;
    (variance - 2.0 * covariance + grown).max(least * variance)
}

#[cfg(test)]
mod tests {
    use ratewright_timing::exact;

    use super::*;

    const SECOND: i64 = 1_000_000_000;

    fn clock(lineage: u32, drift: f64, phase_ns: f64, phase_deviation_ns: f64) -> Traced {
        let estimate = Estimate {
            drift,
            phase_ns,
            phase_deviation_ns,
            ..exact(0)
        };
        Traced {
            estimate,
            lineage: Lineage::of(lineage),
            measured: true,
            restart: None,
            settled: true,
        }
    }

    #[test]
    fn a_better_phase_revises_the_beginning() {
        let mut passage = Passage::begin(0);
        let mut gained = passage.advance(0, SECOND, &clock(1, 5e-6, 100.0, 900.0));
        assert!(
            (gained - 5_000.0).abs() < 1e-6,
            "nothing is known but the drift"
        );
        // The drift was 8 ppm, as is now known far better.
        gained += passage.advance(SECOND, 2 * SECOND, &clock(1, 8e-6, 9_000.0, 10.0));
        assert!((gained - 16_000.0).abs() < 1e-6, "the past is revised");
        // From a good beginning on, the phase alone counts.
        gained += passage.advance(2 * SECOND, 3 * SECOND, &clock(1, 8e-6, 17_100.0, 10.0));
        assert!(
            (gained - 24_100.0).abs() < 1e-6,
            "an increment of the phase"
        );
    }

    #[test]
    fn another_lineage_opens_another_leg_and_keeps_the_variance() {
        let mut passage = Passage::begin(0);
        passage.advance(0, SECOND, &clock(1, 5e-6, 0.0, 30.0));
        passage.advance(SECOND, 2 * SECOND, &clock(1, 5e-6, 5_000.0, 30.0));
        let before = passage.variance_ns2();
        let gained = passage.advance(2 * SECOND, 3 * SECOND, &clock(2, 6e-6, 777_777.0, 40.0));
        assert!(
            (gained - 6_000.0).abs() < 1e-6,
            "phases of different links have nothing in common"
        );
        assert!(passage.variance_ns2() >= before + 40.0 * 40.0);
    }
}
