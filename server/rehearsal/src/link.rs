//! The network between a host and the house, and other things that take their time.
//!
//! Delays are drawn by index, not in turn as those of [`ratewright_timing::sim`] are: a facility that is
//! resumed skips what was not read without drawing it.

use ratewright_timing::sim::Period;
use serde::{Deserialize, Serialize};

use crate::dice::Dice;

/// How long something takes: `least_ns`, plus an exponential queue of mean `queue_ns`, and with
/// probability `burst_share` a further one of mean `burst_ns`.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Delay {
    /// Least delay, ns.
    pub least_ns: i64,
    /// Mean of the queue that is always met, ns.
    pub queue_ns: f64,
    /// How often a burst is met as well, 0 to 1.
    pub burst_share: f64,
    /// Mean of what a burst adds, ns.
    pub burst_ns: f64,
}

impl Delay {
    /// A delay without bursts.
    pub const fn calm(least_ns: i64, queue_ns: f64) -> Self {
        Self {
            least_ns,
            queue_ns,
            burst_share: 0.0,
            burst_ns: 0.0,
        }
    }

    /// The delay of occasion `index`, ns.
    pub(crate) fn draw_ns(&self, dice: Dice, index: u64) -> i64 {
        self.draw_congested_ns(1.0, dice, index)
    }

    /// As [`Delay::draw_ns`], with queues and bursts longer by a factor.
    pub(crate) fn draw_congested_ns(&self, factor: f64, dice: Dice, index: u64) -> i64 {
        let mut queue = self.queue_ns * dice.lane(1).exponential(index);
        if self.burst_share > 0.0 && dice.lane(2).uniform(index) < self.burst_share {
            queue += self.burst_ns * dice.lane(3).exponential(index);
        }
        self.least_ns + (factor * queue) as i64
    }
}

/// The network between a host and the house.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Link {
    /// From the host to the house.
    pub there: Delay,
    /// From the house to the host.
    pub back: Delay,
    /// Share of the messages of exchanges that are lost, 0 to 1, each way. (Reports travel on a
    /// connection that sends again, so they are lost in an outage only.)
    pub loss: f64,
    /// When nothing passes, ns since the facility's origin.
    pub outages: Vec<Period>,
    /// When queues and bursts are longer by a factor, since the facility's origin; where several
    /// overlap, the largest counts.
    pub congestions: Vec<(Period, f64)>,
}

impl Link {
    /// True unless there is an outage.
    pub fn is_up(&self, at_ns: i64) -> bool {
        !self.outages.iter().any(|outage| outage.holds(at_ns))
    }

    /// How much longer queues are at `at_ns`.
    pub(crate) fn congestion(&self, at_ns: i64) -> f64 {
        let now = self
            .congestions
            .iter()
            .filter(|(period, _)| period.holds(at_ns));
        now.fold(1.0, |worst, (_, factor)| worst.max(*factor))
    }

    /// True if message `index`, sent at `at_ns`, arrives.
    pub(crate) fn passes(&self, at_ns: i64, dice: Dice, index: u64) -> bool {
        self.is_up(at_ns) && (self.loss == 0.0 || dice.uniform(index) >= self.loss)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    const DRAWS: u64 = 50_000;

    #[test]
    fn nothing_passes_in_an_outage() {
        let outages = vec![Period {
            from_ns: 1_000,
            to_ns: 2_000,
        }];
        let still = Delay::calm(0, 0.0);
        let link = Link {
            there: still,
            back: still,
            loss: 0.2,
            outages,
            congestions: Vec::new(),
        };
        let passed = |at_ns| {
            (0..DRAWS)
                .filter(|&i| link.passes(at_ns, Dice::new(1), i))
                .count()
        };
        assert_eq!([passed(1_000), passed(1_999)], [0, 0]);
        // Five standard errors of a share.
        let share = passed(2_000) as f64 / DRAWS as f64;
        assert!(
            (share - 0.8).abs() < 5.0 * (0.16 / DRAWS as f64).sqrt(),
            "{share}"
        );
    }

    /// The mean within five standard errors; the variance of the parts adds up.
    #[test]
    fn delays_are_as_declared() {
        let delay = Delay {
            least_ns: 250_000,
            queue_ns: 4e4,
            burst_share: 0.1,
            burst_ns: 1e6,
        };
        let drawn: Vec<_> = (0..DRAWS).map(|i| delay.draw_ns(Dice::new(2), i)).collect();
        assert!(drawn.iter().all(|&ns| ns >= 250_000));
        let mean = drawn.iter().sum::<i64>() as f64 / DRAWS as f64;
        let deviation = (1.6e9 + 0.1 * 2e12 - 1e10_f64).sqrt();
        let error = deviation / (DRAWS as f64).sqrt();
        assert!((mean - 390_000.0).abs() < 5.0 * error, "mean {mean}");
    }
}
