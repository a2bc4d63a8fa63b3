//! A whole facility, played.

use num_rational::Ratio;
use ratewright_control::{Event, HouseNs, Id};
use ratewright_timing::sim::{Clock, ClockModel, Disturbance, Upset};

use crate::{
    dice::Dice,
    plan::{Host, Plan, PlanError},
    probe::{Delivered, Probe, true_clock},
    ticks::ticks_within,
};

/// A facility whose life is a function of its plan, its seed and its origin alone.
#[derive(Clone, Debug)]
pub struct Facility {
    plan: Plan,
    dice: Dice,
    origin_ns: HouseNs,
    probes: Vec<Probe>,
}

impl Facility {
    /// The facility of a plan. It begins at `origin_ns` of house time; every time in the plan counts
    /// from there.
    ///
    /// # Errors
    /// [`PlanError`] names the first field of the plan that can't be.
    pub fn new(plan: Plan, seed: u64, origin_ns: HouseNs) -> Result<Self, PlanError> {
        plan.check()?;
        let dice = Dice::new(seed);
        let host_of = |id: &Id| plan.hosts.iter().find(|host| host.clock.id == *id);
        let of_host = |host: &Host| Probe::of_host(host, dice, origin_ns);
        let mut probes: Vec<_> = plan.hosts.iter().map(of_host).collect();
        for device in &plan.devices {
            let host = host_of(&device.host).expect("the check found every device's host");
            probes.push(Probe::of_device(device, host, dice, origin_ns));
        }
        Ok(Self {
            plan,
            dice,
            origin_ns,
            probes,
        })
    }

    /// House time at which it began, ns.
    pub fn origin_ns(&self) -> HouseNs {
        self.origin_ns
    }

    /// The plan.
    pub fn plan(&self) -> &Plan {
        &self.plan
    }

    /// The declarations, clocks first.
    pub fn declarations(&self) -> impl Iterator<Item = Event> {
        let clocks = self.plan.clocks().cloned().map(Event::DeclareClock);
        clocks.chain(
            self.plan
                .crossings
                .iter()
                .cloned()
                .map(Event::DeclareCrossing),
        )
    }

    /// What reached the house by `house_ns` and was not asked for before, in order of arrival.
    /// Asking often or seldom gives the same readings in the same order.
    pub fn until(&mut self, house_ns: HouseNs) -> Vec<Delivered> {
        let mut delivered = Vec::new();
        for probe in &mut self.probes {
            probe.deliver(house_ns, &mut delivered);
        }
        // Stable: those that arrive in the same nanosecond keep the order of the plan.
        delivered.sort_by_key(|delivered| delivered.at_ns);
        delivered
    }

    /// Leaves out everything that was read before `house_ns`: the reporters were not running.
    pub fn skip_to(&mut self, house_ns: HouseNs) {
        for probe in &mut self.probes {
            probe.skip_to(house_ns);
        }
    }

    /// What a clock truly does; `None` if the plan has no such clock.
    pub fn true_clock(&self, id: &Id) -> Option<TrueClock> {
        let nominal_hz = self.plan.clocks().find(|clock| clock.id == *id)?.nominal_hz;
        let hosts = self
            .plan
            .hosts
            .iter()
            .map(|host| (&host.clock.id, &host.oscillator));
        let devices = self
            .plan
            .devices
            .iter()
            .map(|device| (&device.clock.id, &device.oscillator));
        let found = hosts.chain(devices).find(|(clock, _)| *clock == id);
        let model = found.map_or_else(steady, |(_, model)| model.clone());
        let clock = true_clock(id, &model, self.dice);
        let stepless = ClockModel {
            upsets: model
                .upsets
                .iter()
                .copied()
                .filter(|upset| !is_step(upset))
                .collect(),
            ..model
        };
        Some(TrueClock {
            nominal_hz,
            origin_ns: self.origin_ns,
            clock,
            stepless: true_clock(id, &stepless, self.dice),
        })
    }
}

/// A clock that keeps house time.
fn steady() -> ClockModel {
    ClockModel {
        white_fm: 0.0,
        walk_fm: 0.0,
        ..ClockModel::crystal()
    }
}

fn is_step(upset: &Upset) -> bool {
    matches!(upset.what, Disturbance::PhaseStep(_))
}

/// The true condition of a clock at an instant.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Truth {
    /// Clock time minus house time gained since the origin, s.
    pub phase_s: f64,
    /// Drift, dimensionless; positive runs fast.
    pub drift: f64,
}

/// The truth about one clock, for checks. It is asked forwards: a question may go back at most to the
/// beginning of the second of the latest one.
#[derive(Clone, Debug)]
pub struct TrueClock {
    nominal_hz: Ratio<u64>,
    origin_ns: HouseNs,
    clock: Clock,
    /// The same life without steps: a clock that shows another time has made no other samples.
    stepless: Clock,
}

impl TrueClock {
    /// The clock at `house_ns`, not before the facility's origin.
    pub fn at(&mut self, house_ns: HouseNs) -> Truth {
        let at_ns = house_ns - self.origin_ns;
        Truth {
            phase_s: self.clock.phase_s(at_ns),
            drift: self.clock.drift(at_ns),
        }
    }

    /// Ticks that pass from `from_ns` to `until_ns` of house time. Steps of what the clock shows are none.
    pub(crate) fn ticks(&mut self, from_ns: HouseNs, until_ns: HouseNs) -> f64 {
        let mut phase_s = |at_ns: HouseNs| self.stepless.phase_s(at_ns - self.origin_ns);
        let gained_s = -phase_s(from_ns) + phase_s(until_ns);
        ticks_within(self.nominal_hz, until_ns - from_ns, gained_s)
    }

    /// The first instant at or after `house_ns` at which the count of ticks since the origin is a multiple
    /// of `block`: a block end. To the nanosecond.
    pub(crate) fn block_end(&mut self, house_ns: HouseNs, block: u32) -> (HouseNs, u64) {
        let since_ns = house_ns - self.origin_ns;
        let count = ticks_within(self.nominal_hz, since_ns, self.stepless.phase_s(since_ns));
        // Half a billionth of a tick is rounding, not a new block.
        let blocks = libm::ceil(count / f64::from(block) - 1e-9);
        let missing = (blocks * f64::from(block) - count).max(0.0);
        let hz = *self.nominal_hz.numer() as f64 / *self.nominal_hz.denom() as f64;
        let rate_hz = hz * (1.0 + self.stepless.drift(since_ns));
        let wait_ns = libm::ceil(missing / rate_hz * 1e9) as HouseNs;
        (house_ns + wait_ns, blocks as u64 * u64::from(block))
    }
}

#[cfg(test)]
mod tests {
    use ratewright_timing::Measurement;

    use super::*;
    use crate::{
        link::{Delay, Link},
        plan::DeviceReading,
        sample,
    };

    const S: HouseNs = 1_000_000_000;
    const ORIGIN_NS: HouseNs = 1_700_000_000 * S + 123;

    fn sample_facility(seed: u64) -> Facility {
        Facility::new(sample::plan(), seed, ORIGIN_NS).unwrap()
    }

    fn bytes(delivered: &[Delivered]) -> Vec<u8> {
        let readings: Vec<_> = delivered.iter().map(|d| (d.at_ns, &d.reading)).collect();
        postcard::to_stdvec(&readings).unwrap()
    }

    #[test]
    fn same_seed_same_bytes_however_often_it_is_asked() {
        let whole = sample_facility(5).until(ORIGIN_NS + 700 * S);
        let mut facility = sample_facility(5);
        let mut parts = Vec::new();
        for step in 1..=7_000 {
            parts.extend(facility.until(ORIGIN_NS + step * S / 10));
        }
        assert!(whole.len() > 9_000, "{} readings", whole.len());
        assert_eq!(bytes(&whole), bytes(&parts));
        assert_ne!(
            bytes(&whole),
            bytes(&sample_facility(6).until(ORIGIN_NS + 700 * S))
        );
    }

    #[test]
    fn readings_arrive_in_order_and_none_before_it_is_asked_for() {
        let mut facility = sample_facility(5);
        let mut last_ns = ORIGIN_NS;
        for step in 1..=900 {
            let asked_ns = ORIGIN_NS + step * S;
            for delivered in facility.until(asked_ns) {
                assert!((last_ns..=asked_ns).contains(&delivered.at_ns));
                last_ns = delivered.at_ns;
            }
        }
    }

    /// A daemon that comes back after ten minutes finds the facility as it would have been.
    #[test]
    fn skipping_leaves_the_rest_as_it_was() {
        let (gap_ns, end_ns) = (ORIGIN_NS + 600 * S, ORIGIN_NS + 1_200 * S);
        let mut resumed = sample_facility(5);
        resumed.skip_to(gap_ns);
        let rest = resumed.until(end_ns);
        let mut whole = sample_facility(5).until(end_ns);
        whole.retain(|d| rest.iter().any(|r| key(r) == key(d)));
        assert!(rest.len() > 8_000, "{} readings", rest.len());
        assert_eq!(bytes(&rest), bytes(&whole));
    }

    fn key(delivered: &Delivered) -> (&Id, u64) {
        (&delivered.reading.clock, delivered.reading.sequence)
    }

    #[test]
    fn nothing_comes_from_the_ferry_in_its_outage() {
        let delivered = sample_facility(5).until(ORIGIN_NS + 700 * S);
        let ferry = |d: &&Delivered| d.reading.probe == "host-ferry";
        let (from_ns, until_ns) = (sample::FERRY_OUTAGE.from_ns, sample::FERRY_OUTAGE.to_ns);
        let slack_ns = S / 10;
        let outage = ORIGIN_NS + from_ns + slack_ns..ORIGIN_NS + until_ns;
        assert!(
            !delivered
                .iter()
                .filter(ferry)
                .any(|d| outage.contains(&d.at_ns))
        );
        assert!(
            delivered
                .iter()
                .filter(ferry)
                .any(|d| d.at_ns > ORIGIN_NS + until_ns)
        );
    }

    /// With a perfect host and no latch delay a counter shows ⌊f·(1+y)·t⌋ at its stamp.
    #[test]
    fn counters_tell_the_truth() {
        let mut plan = sample::plan();
        plan.devices
            .retain(|device| device.clock.id.as_str() == "gramophone");
        plan.hosts
            .retain(|host| host.clock.id.as_str() == "host-attic");
        plan.hosts[0].oscillator = steady();
        plan.hosts[0].ahead_ns = 0;
        plan.devices[0].oscillator = ClockModel {
            drift: 2e-5,
            ..steady()
        };
        plan.devices[0].reading = DeviceReading::Counter {
            bits: 64,
            latch: Delay::calm(0, 0.0),
        };
        let mut start = None;
        for delivered in Facility::new(plan, 9, ORIGIN_NS)
            .unwrap()
            .until(ORIGIN_NS + 100 * S)
        {
            let Measurement::Counter {
                count,
                reference_ns,
                ..
            } = delivered.reading.measurement
            else {
                continue;
            };
            let exact = (reference_ns - ORIGIN_NS) as f64 * 1e-9 * 44_100.0 * 1.00002;
            // The counter began anywhere; the first reading tells where.
            let start = *start.get_or_insert(count as f64 - exact.floor());
            let part = exact - (count as f64 - start);
            assert!(
                (-1e-6..1.0).contains(&part),
                "{part} of a tick after the count"
            );
        }
        assert!(start.is_some());
    }

    #[test]
    fn a_plan_that_cannot_be_is_refused_by_name() {
        let mut plan = sample::plan();
        plan.devices[3].host = Id::new("host-nowhere").unwrap();
        let error = Facility::new(plan, 1, 0).unwrap_err();
        assert_eq!(
            error.to_string(),
            "devices[3].host is host-nowhere; accepted: the id of a host of the plan"
        );
        let mut plan = sample::plan();
        plan.hosts[0].link = Link {
            loss: 1.0,
            ..plan.hosts[0].link.clone()
        };
        assert_eq!(
            Facility::new(plan, 1, 0).unwrap_err().field,
            "hosts[0].link.loss"
        );
    }
}
