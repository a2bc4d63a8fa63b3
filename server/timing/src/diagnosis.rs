//! What the link makes of its probe, for people.

use crate::bank::{Bank, JUMP, WALKS};
use crate::direction::Direction;
use crate::filter::Filter;

/// What the link makes of its probe: the noise of each direction and the wander of the clock.
#[derive(Clone, Debug, PartialEq)]
pub struct Diagnosis {
    /// The direction that measures, or those going out and coming back; none while the first
    /// readings are gathered, and for drift readings.
    pub directions: Vec<DirectionDiagnosis>,
    /// What drift readings show of themselves; none for all other measurements.
    pub drift_readings: Option<DriftDiagnosis>,
    /// Shares of belief in how the clock wanders.
    pub wander: Wander,
}

/// Noise of drift readings.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct DriftDiagnosis {
    /// Deviation of a reading as it shows itself, dimensionless.
    pub deviation: f64,
    /// Deviation that the latest reading claimed, dimensionless.
    pub claimed: f64,
}

/// Noise of one direction.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct DirectionDiagnosis {
    /// Deviation of the part without delay, s.
    pub deviation_s: f64,
    /// Shares of readings without delay, with the short, and with the long tail.
    pub shares: [f64; 3],
    /// Means of the short and of the long tail, s.
    pub tails_s: [f64; 2],
    /// Share of readings that are no use at all.
    pub useless: f64,
    /// Readings that speak as one, because they resemble each other: 1 to 20.
    pub alike: f64,
    /// Deviation of a normal reading that would tell as much as one of these, s.
    pub worth_s: f64,
    /// Probability that the path is now in a burst of queueing (two-way paths only).
    pub burst: f64,
}

/// Shares of belief in how the clock wanders; together 1.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct Wander {
    /// Drift walks at random, from calm to restless.
    pub walks: [f64; 3],
    /// Drift follows a slope, as with temperature or warm-up, from slow to fast.
    pub slopes: [f64; 3],
    /// Drift has just jumped.
    pub jump: f64,
}

impl Wander {
    /// Shares of the bank's modes.
    pub(crate) fn of(bank: &Bank) -> Self {
        let mut wander = Wander::default();
        let weights = bank.weights();
        let total: f64 = weights.iter().sum();
        for (j, weight) in weights.into_iter().enumerate() {
            let share = weight / total;
            match j {
                JUMP => wander.jump = share,
                _ if j < WALKS => wander.walks[j] = share,
                _ => wander.slopes[j - WALKS] = share,
            }
        }
        wander
    }
}

impl Filter {
    pub(crate) fn diagnosis(&self) -> Diagnosis {
        Diagnosis {
            directions: self.measuring().map(Direction::diagnosis).collect(),
            drift_readings: None,
            wander: Wander::of(&self.bank),
        }
    }
}

impl Direction {
    fn diagnosis(&self) -> DirectionDiagnosis {
        let noise = self.noise();
        DirectionDiagnosis {
            deviation_s: 1e-6 * noise.sigma,
            shares: noise.weights,
            tails_s: noise.tau.map(|tau| 1e-6 * tau),
            useless: noise.flat,
            alike: self.thinning(),
            worth_s: 1e-6 * (self.thinning() / self.information()).sqrt(),
            burst: self.burst(),
        }
    }
}

#[cfg(test)]
mod tests {
    use num_rational::Ratio;

    use crate::sim::{Clock, ClockModel, Delay, Path, PathModel, Random, probe};
    use crate::{Link, LinkConfig, Measurement, State};

    #[test]
    fn drift_readings_worse_than_they_claim_are_found_out_and_a_lock_is_foreseen() {
        let mut clock = Clock::new(ClockModel::crystal(), 3);
        let mut random = Random::new(4);
        let mut link = Link::new(LinkConfig::new(Ratio::from_integer(1))).unwrap();
        let mut foreseen = None;
        let mut locked = None;
        for i in 1..4000_i64 {
            let at_ns = i * 5_000_000_000;
            let Measurement::Frequency {
                drift,
                reference_ns,
                ..
            } = probe::frequency(&mut clock, &mut random, 1e-6, at_ns)
            else {
                panic!("a drift")
            };
            let reading = Measurement::Frequency {
                drift,
                deviation: 0.5e-6,
                reference_ns,
            };
            link.observe(i as u64, &reading).unwrap();
            let estimate = link.estimate(at_ns);
            if i == 100 {
                foreseen = estimate.lock_expected_in_s.map(|wait| 500.0 + wait);
            }
            if estimate.state == State::Locked && locked.is_none() {
                locked = Some(i as f64 * 5.0);
            }
        }
        let readings = link.diagnosis().drift_readings.unwrap();
        assert!((readings.claimed - 0.5e-6).abs() < 1e-12);
        assert!((readings.deviation - 1e-6).abs() < 0.3e-6, "{readings:?}");
        let (foreseen, locked) = (foreseen.unwrap(), locked.unwrap());
        let ratio = foreseen / locked;
        assert!((0.4..2.5).contains(&ratio), "{foreseen} s, {locked} s");
        assert!(link.diagnosis().wander.walks[0] > 0.0);
    }

    #[test]
    fn the_noise_of_a_probe_is_found_out() {
        let delay = Delay::Tailed {
            deviation_s: 20e-6,
            share: 0.3,
            tail_s: 200e-6,
            outliers: 0.005,
        };
        let mut clock = Clock::new(
            ClockModel {
                drift: 8e-6,
                ..ClockModel::crystal()
            },
            1,
        );
        let mut path = Path::new(PathModel::new(delay), 2);
        let hz = Ratio::from_integer(10_000_000);
        let mut link = Link::new(LinkConfig::new(hz)).unwrap();
        for i in 1..6000 {
            let reading = probe::counter(&mut clock, &mut path, hz, 32, i * 1_000_000_000);
            link.observe(i as u64, &reading.unwrap()).unwrap();
        }
        let diagnosis = link.diagnosis();
        let d = diagnosis.directions[0];
        assert!((d.deviation_s - 20e-6).abs() < 4e-6, "{d:?}");
        let tail = d.shares[1] * d.tails_s[0] + d.shares[2] * d.tails_s[1];
        assert!((tail - 0.3 * 200e-6).abs() < 20e-6, "{d:?}");
        assert!(d.useless < 0.02 && d.alike < 1.5, "{d:?}");
        assert!((20e-6..40e-6).contains(&d.worth_s), "{d:?}");
        let w = diagnosis.wander;
        let total: f64 = w.walks.iter().chain(&w.slopes).sum::<f64>() + w.jump;
        assert!((total - 1.0).abs() < 1e-12);
    }
}
