//! Who reads what: the readings of one clock by one host, in order.

use num_rational::Ratio;
use ratewright_control::{HouseNs, Id, Reading, Reference};
use ratewright_timing::{
    Measurement,
    sim::{Clock, ClockModel},
};

use crate::{
    dice::Dice,
    link::{Delay, Link},
    plan::{Device, DeviceReading, Host},
    ticks::ticks,
};

/// A reading, and when it reaches the house.
#[derive(Clone, Debug, PartialEq)]
pub struct Delivered {
    /// House time of arrival, ns.
    pub at_ns: HouseNs,
    /// The reading.
    pub reading: Reading,
}

/// Readings are taken at even times, but for up to this share of the interval each way, so that they
/// never beat with what they read.
const DITHER: f64 = 0.2;
/// An exchange or a latch is given up when it takes longer than this share of the interval: the next
/// one is due.
const PATIENCE: f64 = 0.4;
/// The house answers an exchange after this, ns.
const ANSWER_NS: i64 = 20_000;

/// All the readings of one clock.
#[derive(Clone, Debug)]
pub(crate) struct Probe {
    origin_ns: HouseNs,
    clock: Id,
    nominal_hz: Ratio<u64>,
    truth: Clock,
    host: HostSide,
    every_ns: i64,
    means: Means,
    dice: Dice,
    next: u64,
    /// When the counter began at 0 again, and what it would have shown there otherwise.
    resets: Vec<(i64, i128)>,
    /// Taken, but not arrived by the latest question.
    under_way: Option<Delivered>,
    arrived_ns: HouseNs,
}

/// The host a probe runs on.
#[derive(Clone, Debug)]
struct HostSide {
    id: Id,
    truth: Clock,
    ahead_ns: i64,
    link: Link,
}

#[derive(Clone, Copy, Debug)]
enum Means {
    Exchange,
    Device(DeviceReading),
}

impl Probe {
    /// The exchanges by which a host reads its own clock against the house.
    pub(crate) fn of_host(host: &Host, dice: Dice, origin_ns: HouseNs) -> Self {
        Self {
            origin_ns,
            clock: host.clock.id.clone(),
            nominal_hz: host.clock.nominal_hz,
            truth: true_clock(&host.clock.id, &host.oscillator, dice),
            host: HostSide::new(host, dice),
            every_ns: host.exchange_every_ns,
            means: Means::Exchange,
            dice: dice.named("probe").named(host.clock.id.as_str()),
            next: 0,
            resets: Vec::new(),
            under_way: None,
            arrived_ns: origin_ns,
        }
    }

    /// The readings that a host takes of a device.
    pub(crate) fn of_device(device: &Device, host: &Host, dice: Dice, origin_ns: HouseNs) -> Self {
        let mut ahead = true_clock(&device.clock.id, &device.oscillator, dice);
        let mut count_at = |&at_ns: &i64| {
            (
                at_ns,
                ticks(device.clock.nominal_hz, at_ns, ahead.phase_s(at_ns)),
            )
        };
        Self {
            resets: device.resets_ns.iter().map(&mut count_at).collect(),
            clock: device.clock.id.clone(),
            nominal_hz: device.clock.nominal_hz,
            truth: true_clock(&device.clock.id, &device.oscillator, dice),
            every_ns: device.every_ns,
            means: Means::Device(device.reading),
            dice: dice.named("probe").named(device.clock.id.as_str()),
            ..Self::of_host(host, dice, origin_ns)
        }
    }

    /// Appends to `out` what has arrived by `until_ns` and was not given before.
    pub(crate) fn deliver(&mut self, until_ns: HouseNs, out: &mut Vec<Delivered>) {
        loop {
            if self.under_way.is_none() {
                // Nothing arrives before it is taken.
                if self.origin_ns + self.earliest_ns(self.next) > until_ns {
                    return;
                }
                self.under_way = self.take();
            }
            match self
                .under_way
                .take_if(|delivered| delivered.at_ns <= until_ns)
            {
                Some(delivered) => out.push(delivered),
                None if self.under_way.is_some() => return,
                None => {}
            }
        }
    }

    /// Leaves out everything taken before `at_ns`: its reporter was not there.
    pub(crate) fn skip_to(&mut self, at_ns: HouseNs) {
        self.under_way = None;
        while self.origin_ns + self.earliest_ns(self.next) < at_ns {
            self.next += 1;
        }
    }

    fn earliest_ns(&self, index: u64) -> i64 {
        self.every_ns * index as i64
    }

    fn patience_ns(&self) -> i64 {
        (PATIENCE * self.every_ns as f64) as i64
    }

    fn take(&mut self) -> Option<Delivered> {
        let index = self.next;
        self.next += 1;
        let dither = 2.0 * DITHER * self.dice.lane(1).uniform(index) * self.every_ns as f64;
        let at_ns = self.earliest_ns(index) + dither as i64;
        let (done_ns, reference, measurement) = match self.means {
            Means::Exchange => self.exchange(index, at_ns)?,
            Means::Device(reading) => self.read_device(index, at_ns, reading),
        };
        let arrived_ns = self.report(done_ns)?;
        let probe = self.host.id.as_str().to_owned();
        let reading = Reading {
            clock: self.clock.clone(),
            reference,
            probe,
            sequence: index + 1,
            measurement,
        };
        Some(Delivered {
            at_ns: arrived_ns,
            reading,
        })
    }

    /// The report of something done at `done_ns` since the origin: one stream, so in order.
    fn report(&mut self, done_ns: i64) -> Option<HouseNs> {
        if !self.host.link.is_up(done_ns) {
            return None;
        }
        let arrival_ns = self.origin_ns + done_ns + self.host.link.there.least_ns;
        self.arrived_ns = self.arrived_ns.max(arrival_ns);
        Some(self.arrived_ns)
    }

    fn exchange(&mut self, index: u64, asked_ns: i64) -> Option<(i64, Reference, Measurement)> {
        let link = &self.host.link;
        let (there, back) = (self.dice.lane(2), self.dice.lane(3));
        let arrives_ns = asked_ns
            + link
                .there
                .draw_congested_ns(link.congestion(asked_ns), there, index);
        let answered_ns = arrives_ns + ANSWER_NS;
        let done_ns = answered_ns
            + link
                .back
                .draw_congested_ns(link.congestion(answered_ns), back, index);
        let passed = link.passes(asked_ns, there.lane(9), index)
            && link.passes(answered_ns, back.lane(9), index)
            && done_ns - asked_ns <= self.patience_ns();
        if !passed {
            return None;
        }
        let measurement = Measurement::Exchange {
            t1_ns: self.host_shows(asked_ns),
            t2_ns: self.origin_ns + arrives_ns,
            t3_ns: self.origin_ns + answered_ns,
            t4_ns: self.host_shows(done_ns),
        };
        Some((done_ns, Reference::House, measurement))
    }

    fn read_device(
        &mut self,
        index: u64,
        at_ns: i64,
        reading: DeviceReading,
    ) -> (i64, Reference, Measurement) {
        match reading {
            DeviceReading::Counter { bits, latch } => {
                let (stamped_ns, count, reference_ns) = self.latch(index, at_ns, bits, latch);
                (
                    stamped_ns,
                    self.by_host(),
                    Measurement::Counter {
                        count,
                        bits,
                        reference_ns,
                    },
                )
            }
            DeviceReading::SenderReport { bits, latch } => {
                let (stamped_ns, media_timestamp, reference_ns) =
                    self.latch(index, at_ns, bits, latch);
                let measurement = Measurement::SenderReport {
                    media_timestamp,
                    bits,
                    reference_ns,
                };
                (stamped_ns, self.by_host(), measurement)
            }
            DeviceReading::Frequency { deviation } => {
                let error = deviation * self.dice.lane(4).normal(index);
                let drift = self.truth.drift(at_ns) + error;
                let reference_ns = self.origin_ns + at_ns;
                (
                    at_ns,
                    Reference::House,
                    Measurement::Frequency {
                        drift,
                        deviation,
                        reference_ns,
                    },
                )
            }
        }
    }

    /// When the host stamped what was latched, the count, and the stamp.
    fn latch(&mut self, index: u64, latched_ns: i64, bits: u32, latch: Delay) -> (i64, u64, i64) {
        let phase_s = self.truth.phase_s(latched_ns);
        let ticks = ticks(self.nominal_hz, latched_ns, phase_s);
        let delay_ns = latch.draw_ns(self.dice.lane(5), index);
        let stamped_ns = latched_ns + delay_ns.min(self.patience_ns());
        let reset = self
            .resets
            .iter()
            .rev()
            .find(|(at_ns, _)| *at_ns <= latched_ns);
        let begin = reset.map_or_else(|| self.first_count(bits), |(_, shown)| -shown);
        (
            stamped_ns,
            wrap(ticks + begin, bits),
            self.host_shows(stamped_ns),
        )
    }

    fn by_host(&self) -> Reference {
        Reference::Clock(self.host.id.clone())
    }

    /// A counter that was switched on long before the origin shows anything.
    fn first_count(&self, bits: u32) -> i128 {
        let span = (1_u64 << bits.min(40)) as f64;
        (self.dice.lane(6).uniform(0) * span) as i128
    }

    fn host_shows(&mut self, at_ns: i64) -> i64 {
        self.origin_ns + self.host.ahead_ns + self.host.truth.reading_ns(at_ns)
    }
}

impl HostSide {
    fn new(host: &Host, dice: Dice) -> Self {
        Self {
            id: host.clock.id.clone(),
            truth: true_clock(&host.clock.id, &host.oscillator, dice),
            ahead_ns: host.ahead_ns,
            link: host.link.clone(),
        }
    }
}

/// The one life of a clock: whoever asks has one of the same seed, and asks it forwards.
pub(crate) fn true_clock(id: &Id, model: &ClockModel, dice: Dice) -> Clock {
    let seed = dice.named("clock").named(id.as_str()).bits(0);
    Clock::new(model.clone(), seed)
}

fn wrap(count: i128, bits: u32) -> u64 {
    count.rem_euclid(1_i128 << bits) as u64
}
