//! The true phase error of a crossing, to judge the engine by.

use ratewright_control::{CrossingDeclaration, HouseNs};

use crate::facility::{Facility, TrueClock};

/// The true φ = ∫ ((L/M)·f_source,true − f_sink,true) dt of a crossing, in sink samples, under the ratios
/// that are put in force.
///
/// ```
/// # use ratewright_control::*;
/// # use ratewright_rehearsal::*;
/// # use num_rational::Ratio;
/// # let id = |text| Id::new(text).unwrap();
/// # let clock = |name, hz| ClockDeclaration { exact: true,
/// #     ..ClockDeclaration::new(id(name), Ratio::from_integer(hz)) };
/// # let bounds = ratewright_ratio::Bounds::new(512, 512).unwrap();
/// # let crossing = CrossingDeclaration::new(id("line"), id("source"), id("sink"), bounds);
/// # let plan = Plan { hosts: vec![], devices: vec![], exact: vec![clock("source", 48_000), clock("sink", 48_000)], followers: vec![],
/// #     crossings: vec![crossing.clone()] };
/// # let facility = Facility::new(plan, 1, 0).unwrap();
/// // Both clocks tick at exactly 48 kHz: 49/48 makes 1000 samples too many each second.
/// let mut phase = TruePhase::new(&facility, &crossing, 49.0 / 48.0).unwrap();
/// assert!((phase.at(2_000_000_000) - 2_000.0).abs() < 1e-6);
/// phase.put_in_force(1.0, 3_000_000_000);
/// assert!((phase.at(9_000_000_000) - 3_000.0).abs() < 1e-6);
/// ```
#[derive(Clone, Debug)]
pub struct TruePhase {
    source: TrueClock,
    sink: TrueClock,
    ratio: f64,
    since_ns: HouseNs,
    samples: f64,
}

impl TruePhase {
    /// Starts at 0 at the facility's origin with `ratio` in force; `None` if the plan lacks a clock of
    /// the crossing.
    pub fn new(facility: &Facility, crossing: &CrossingDeclaration, ratio: f64) -> Option<Self> {
        Self::starting(facility, crossing, ratio, facility.origin_ns())
    }

    /// As [`TruePhase::new`], from `from_ns` on.
    pub fn starting(
        facility: &Facility,
        crossing: &CrossingDeclaration,
        ratio: f64,
        from_ns: HouseNs,
    ) -> Option<Self> {
        let source = facility.true_clock(&crossing.source)?;
        let sink = facility.true_clock(&crossing.sink)?;
        Some(Self {
            source,
            sink,
            ratio,
            since_ns: from_ns,
            samples: 0.0,
        })
    }

    /// φ at `house_ns`, sink samples. Times before the latest question count as that.
    pub fn at(&mut self, house_ns: HouseNs) -> f64 {
        if house_ns > self.since_ns {
            let made = self.ratio * self.source.ticks(self.since_ns, house_ns);
            self.samples += made - self.sink.ticks(self.since_ns, house_ns);
            self.since_ns = house_ns;
        }
        self.samples
    }

    /// From `effect_ns` on, `ratio` is in force.
    pub fn put_in_force(&mut self, ratio: f64, effect_ns: HouseNs) {
        self.at(effect_ns);
        self.ratio = ratio;
    }
}
