//! One direction of a path between a clock and its reference.

use serde::{Deserialize, Serialize};

use super::delay::Delay;
use super::random::Random;

/// How a path delays and loses.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct PathModel {
    /// Least delay, s.
    pub least_s: f64,
    /// Delay beyond it.
    pub delay: Delay,
    /// Share lost.
    pub loss: f64,
    /// Times when nothing comes through.
    pub outages: Vec<Period>,
    /// Times when queues are longer by a factor; where they overlap, the largest counts.
    pub congestions: Vec<(Period, f64)>,
    /// From these times on (ns) the least delay is longer by so many seconds.
    pub route_changes: Vec<(i64, f64)>,
}

/// From a time to another, ns: the first belongs to it, the second does not.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct Period {
    /// Begin, ns.
    pub from_ns: i64,
    /// End, ns.
    pub to_ns: i64,
}

impl Period {
    /// Whether a time is within.
    pub fn holds(&self, at_ns: i64) -> bool {
        (self.from_ns..self.to_ns).contains(&at_ns)
    }
}

impl PathModel {
    /// A path of the given delay that loses nothing.
    pub fn new(delay: Delay) -> Self {
        PathModel {
            least_s: 0.0,
            delay,
            loss: 0.0,
            outages: Vec::new(),
            congestions: Vec::new(),
            route_changes: Vec::new(),
        }
    }
}

/// A path made from a model and a seed.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Path {
    model: PathModel,
    random: Random,
    memory: f64,
}

impl Path {
    /// A path from its model.
    pub fn new(model: PathModel, seed: u64) -> Self {
        Path {
            model,
            random: Random::new(seed),
            memory: 0.0,
        }
    }

    /// Delay of what enters at a true time, s; none when it is lost.
    pub fn delay_s(&mut self, at_ns: i64) -> Option<f64> {
        let congestions = self.model.congestions.iter();
        let holding = congestions.filter(|(period, _)| period.holds(at_ns));
        let longer = holding.fold(1.0, |worst: f64, (_, factor)| worst.max(*factor));
        let delay = &self.model.delay;
        let beyond = delay.draw(&mut self.random, &mut self.memory, longer);
        let lost = self.random.chance(self.model.loss);
        if lost || self.model.outages.iter().any(|outage| outage.holds(at_ns)) {
            return None;
        }
        let routes = self
            .model
            .route_changes
            .iter()
            .filter(|(since_ns, _)| *since_ns <= at_ns);
        Some(self.model.least_s + beyond + routes.map(|(_, longer_s)| longer_s).sum::<f64>())
    }
}
