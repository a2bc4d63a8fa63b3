//! Counting: time in each state, and excursions of the phase error.

use ratewright_control::HouseNs;

/// How long something was in each of its states.
#[derive(Clone, Debug, PartialEq)]
pub struct Tenure<S> {
    state: S,
    since_ns: HouseNs,
    times: Vec<(S, i64)>,
}

impl<S: Copy + PartialEq> Tenure<S> {
    /// It is in `state` from `at_ns` on.
    pub(crate) fn new(state: S, at_ns: HouseNs) -> Self {
        Self {
            state,
            since_ns: at_ns,
            times: Vec::new(),
        }
    }

    /// It enters `state` at `at_ns`, which is not before the time of the latest call.
    pub(crate) fn enter(&mut self, state: S, at_ns: HouseNs) {
        let passed_ns = at_ns - self.since_ns;
        match self
            .times
            .iter_mut()
            .find(|(known, _)| *known == self.state)
        {
            Some((_, ns)) => *ns += passed_ns,
            None => self.times.push((self.state, passed_ns)),
        }
        (self.state, self.since_ns) = (state, at_ns);
    }

    /// Seconds in each state that it was ever in, up to the latest call.
    pub fn seconds(&self) -> impl Iterator<Item = (S, f64)> {
        let lasted = self.times.iter().filter(|(_, ns)| *ns > 0);
        lasted.map(|&(state, ns)| (state, ns as f64 * 1e-9))
    }

    /// Seconds in one state, up to the latest call.
    pub fn seconds_in(&self, state: S) -> f64 {
        self.seconds()
            .find(|(known, _)| *known == state)
            .map_or(0.0, |(_, s)| s)
    }
}

/// How far a phase error went.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub(crate) struct Excursions {
    /// Largest magnitude so far.
    pub(crate) worst: f64,
    /// Times it left the headroom.
    pub(crate) slips: u64,
    /// When it first did.
    pub(crate) first_ns: Option<HouseNs>,
    outside: bool,
}

impl Excursions {
    /// The phase error has this magnitude at `at_ns`.
    pub(crate) fn note(&mut self, magnitude: f64, headroom: f64, at_ns: HouseNs) {
        self.worst = self.worst.max(magnitude);
        let outside = magnitude > headroom;
        if outside && !self.outside {
            self.slips += 1;
            self.first_ns = self.first_ns.or(Some(at_ns));
        }
        self.outside = outside;
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn times_add_up() {
        let mut tenure = Tenure::new('a', 0);
        for (state, at_s) in [('b', 3), ('a', 10), ('a', 11), ('b', 15)] {
            tenure.enter(state, at_s * 1_000_000_000);
        }
        assert_eq!((tenure.seconds_in('a'), tenure.seconds_in('b')), (8.0, 7.0));
        assert_eq!(tenure.seconds_in('c'), 0.0);
    }

    #[test]
    fn a_slip_is_counted_when_it_begins() {
        let mut excursions = Excursions::default();
        for (at_ns, magnitude) in [(1, 0.9), (2, 1.1), (3, 1.4), (4, 1.0), (5, 1.2)] {
            excursions.note(magnitude, 1.0, at_ns);
        }
        let Excursions {
            worst,
            slips,
            first_ns,
            ..
        } = excursions;
        assert_eq!((worst, slips, first_ns), (1.4, 2, Some(2)));
    }
}
