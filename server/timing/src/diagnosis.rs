//! What the link makes of its probe, for people.

use crate::bank::{JUMP, WALKS};
use crate::direction::Direction;
use crate::filter::Filter;

/// What the link makes of its probe: the noise of each direction and the wander of the clock.
#[derive(Clone, Debug, PartialEq)]
pub struct Diagnosis {
    /// The direction that measures, or those going out and coming back; none while the first
    /// readings are gathered, and for drift readings.
    pub directions: Vec<DirectionDiagnosis>,
    /// Shares of belief in how the clock wanders.
    pub wander: Wander,
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

impl Filter {
    pub(crate) fn diagnosis(&self) -> Diagnosis {
        let mut wander = Wander::default();
        let weights = self.bank.weights();
        let total: f64 = weights.iter().sum();
        for (j, weight) in weights.into_iter().enumerate() {
            let share = weight / total;
            match j {
                JUMP => wander.jump = share,
                _ if j < WALKS => wander.walks[j] = share,
                _ => wander.slopes[j - WALKS] = share,
            }
        }
        Diagnosis {
            directions: self.measuring().map(Direction::diagnosis).collect(),
            wander,
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

    use crate::sim::{Clock, ClockModel, Delay, Path, PathModel, probe};
    use crate::{Link, LinkConfig};

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
