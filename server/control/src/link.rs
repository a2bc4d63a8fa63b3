//! One link: a clock, read against one reference by one probe.

use ratewright_timing::{
    Estimate, Event as TimingEvent, Link, Measurement, Outcome, Refusal as Timing,
};
use serde::{Deserialize, Serialize};

use crate::clocks::MAX_DEPTH;
use crate::{ClockDeclaration, HouseNs, LinkView, Reading, Reference, Refusal};

/// A link that has been silent for so long gives up its place to a new probe, ns (a day).
const ABANDONED_NS: i64 = 86_400_000_000_000;
/// The least latency seen so far is forgotten at this rate, 1 ns in so many: the reference may
/// run slower than house time, by less than 200 ppm.
const FORGET_LATENCY: i64 = 5_000;

/// Readings until a link is settled (measured with `examples/hold_table`: accounts that trusted the
/// phase earlier were off by three deviations and more).
const SETTLED_ROWS: u16 = 128;
/// A link that took nothing for so long is stuck: it takes a reading that goes back, and begins
/// anew, ns (10 min): a single wrong reference time, or a reference that was set back, must not
/// stop it for ever, while strays that come late do not make it forget what it knows.
const STUCK_NS: i64 = 600_000_000_000;
/// A reading may be ahead of what the link makes of its reference's time by this much, ns (1 h):
/// readings that were kept back may be that far apart, and all come at once.
const LEAP_NS: i64 = 3_600_000_000_000;
/// A reading that arrives later than the least latency by more than this, ns (10 s), was not
/// under way so long: the reference was set, or the least latency came of a wrong time.
const LATEST_NS: i64 = 10_000_000_000;

/// A link's estimator with what the engine must know of its readings.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) struct LinkRecord {
    pub(crate) reference: Reference,
    pub(crate) probe: String,
    pub(crate) reads: Reads,
    link: Link,
    /// Changes whenever the link's phase begins anew.
    pub(crate) lineage: u32,
    /// Readings taken since then, as far as they are counted.
    rows: u16,
    /// How the phase began anew, if it did.
    pub(crate) restart: Option<Box<Restart>>,
    /// House time of the last reading that fitted.
    fitted_ns: HouseNs,
    /// House time of the first one after it that did not.
    unfit_ns: Option<HouseNs>,
    last_sequence: u64,
    /// House time of the last reading's arrival.
    pub(crate) arrived_ns: HouseNs,
    /// Reference time minus house time, from the readings that were under way the least.
    offset_ns: i64,
}

/// What of a clock a link reads; it takes one kind of measurement only.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub(crate) enum Reads {
    /// Samples as they are delivered, counted.
    Samples,
    /// Timestamps that the sender writes.
    Timestamps,
    /// Its time or its drift.
    Time,
}

impl Reads {
    fn of(measurement: &Measurement) -> Self {
        match measurement {
            Measurement::Counter { .. } => Reads::Samples,
            Measurement::SenderReport { .. } => Reads::Timestamps,
            Measurement::Exchange { .. } | Measurement::Frequency { .. } => Reads::Time,
        }
    }
}

/// A link's phase began anew: readings fitted up to one house time, and did not from another on.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
pub(crate) struct Restart {
    pub(crate) fitted_ns: HouseNs,
    pub(crate) unfit_ns: HouseNs,
}

/// The links by which an estimate came, from house time outwards; phases may be compared only
/// between estimates of the same lineage.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Serialize, Deserialize)]
pub(crate) struct Lineage([u32; MAX_DEPTH]);

impl Lineage {
    pub(crate) fn of(link: u32) -> Self {
        Lineage::default().then(link)
    }

    /// One link further out.
    pub(crate) fn then(mut self, link: u32) -> Self {
        if let Some(free) = self.0.iter_mut().find(|place| **place == 0) {
            *free = link;
        }
        self
    }
}

impl LinkRecord {
    /// A new link with its first reading.
    pub(crate) fn begin(
        declaration: &ClockDeclaration,
        reading: &Reading,
        now: HouseNs,
        lineage: u32,
    ) -> Result<(Self, Outcome), Refusal> {
        if reading.probe.is_empty() || reading.probe.len() > 63 {
            let value = format!("{} bytes long", reading.probe.len());
            return Err(Refusal::invalid("probe", value, "1 to 63 bytes"));
        }
        let mut record = LinkRecord {
            reference: reading.reference.clone(),
            probe: reading.probe.clone(),
            reads: Reads::of(&reading.measurement),
            link: fresh(declaration),
            lineage,
            rows: 0,
            restart: None,
            fitted_ns: now,
            unfit_ns: None,
            last_sequence: 0,
            arrived_ns: now,
            offset_ns: reading.measurement.reference_ns().saturating_sub(now),
        };
        let outcome = record.observe(declaration, reading, now, lineage)?;
        Ok((record, outcome))
    }

    pub(crate) fn is_of(&self, reading: &Reading) -> bool {
        self.reference == reading.reference && self.probe == reading.probe
    }

    /// True once the noise has been learned so well that the phase does not move with it any more.
    pub(crate) fn is_settled(&self) -> bool {
        self.rows >= SETTLED_ROWS
    }

    pub(crate) fn is_abandoned(&self, now: HouseNs) -> bool {
        now.saturating_sub(self.arrived_ns) > ABANDONED_NS
    }

    /// Takes a reading; `next_lineage` becomes the link's if its phase begins anew.
    pub(crate) fn observe(
        &mut self,
        declaration: &ClockDeclaration,
        reading: &Reading,
        now: HouseNs,
        next_lineage: u32,
    ) -> Result<Outcome, Refusal> {
        let sequence = match reading.sequence {
            0 => self.last_sequence.saturating_add(1),
            own => own,
        };
        let outcome = match self.link.observe(sequence, &reading.measurement) {
            Err(Timing::TimeWentBack { .. }) if self.is_stuck(now) => {
                let mut link = fresh(declaration);
                link.observe(sequence, &reading.measurement)
                    .map_err(refusal)?;
                self.link = link;
                Outcome::Event(TimingEvent::Restart)
            }
            taken => taken.map_err(refusal)?,
        };
        if outcome == Outcome::Stale {
            return Ok(outcome);
        }
        if outcome == Outcome::Event(TimingEvent::Restart) {
            self.lineage = next_lineage;
            self.rows = 0;
            let unfit_ns = self.unfit_ns.unwrap_or(now);
            self.restart = Some(Box::new(Restart {
                fitted_ns: self.fitted_ns,
                unfit_ns,
            }));
        }
        self.rows = self.rows.saturating_add(1);
        if outcome == Outcome::Outlier {
            self.unfit_ns = self.unfit_ns.or(Some(now));
        } else {
            (self.fitted_ns, self.unfit_ns) = (now, None);
        }
        // An outlier's time is not to be trusted, but after a silence there is no better one.
        if outcome != Outcome::Outlier || self.is_stuck(now) {
            self.keep_offset(reading.measurement.reference_ns(), now);
        }
        self.last_sequence = sequence;
        self.arrived_ns = now;
        Ok(outcome)
    }

    /// Latest time that a host's clock may show by now; any at all once the link is stuck: the
    /// host's clock may have been set.
    pub(crate) fn latest_reference_ns(&self, now: HouseNs) -> i64 {
        if self.is_stuck(now) {
            return i64::MAX;
        }
        now.saturating_add(self.offset_ns).saturating_add(LEAP_NS)
    }

    fn is_stuck(&self, now: HouseNs) -> bool {
        now.saturating_sub(self.arrived_ns) > STUCK_NS
    }

    /// Keeps the offset of the readings that were under way the least.
    fn keep_offset(&mut self, reference_ns: i64, now: HouseNs) {
        let arrived = reference_ns.saturating_sub(now);
        let forgotten = now.saturating_sub(self.arrived_ns) / FORGET_LATENCY;
        let least = self.offset_ns.saturating_sub(forgotten);
        let is_late = arrived < least.saturating_sub(LATEST_NS);
        self.offset_ns = if is_late { arrived } else { arrived.max(least) };
    }

    /// The link for people; whether it counts is for its clock to say.
    pub(crate) fn view(&self, now: HouseNs) -> LinkView {
        let history = self.link.history();
        let in_house_time = |at_ns: i64| at_ns.saturating_sub(self.ahead_ns());
        LinkView {
            reference: self.reference.clone(),
            probe: self.probe.clone(),
            counts: false,
            estimate: self.estimate(now),
            diagnosis: self.link.diagnosis(),
            events: history.events,
            last_event: history
                .last_event
                .map(|(event, at_ns)| (event, in_house_time(at_ns))),
            arrived_ns: self.arrived_ns,
        }
    }

    /// The estimate at a house time, which is mapped to the reference's.
    pub(crate) fn estimate(&self, now: HouseNs) -> Estimate {
        self.link.estimate(now.saturating_add(self.ahead_ns()))
    }

    /// Reference time minus house time. A time of the house that comes late is still that time,
    /// however long it was under way; one that has not come yet is of a scale that is ahead.
    fn ahead_ns(&self) -> i64 {
        match self.reference {
            Reference::House => self.offset_ns.max(0),
            Reference::Clock(_) => self.offset_ns,
        }
    }
}

fn fresh(declaration: &ClockDeclaration) -> Link {
    Link::new(declaration.link_config()).expect("the declaration was checked when it came in")
}

/// A refusal of the estimator, with the path of the field.
fn refusal(refused: Timing) -> Refusal {
    let path = |field: &str| format!("measurement.{field}");
    match refused {
        Timing::OutOfRange {
            field,
            value,
            accepted,
        } => Refusal::invalid(&path(field), value, accepted),
        Timing::TimeWentBack { field, value, last } => Refusal::invalid(
            &path(field),
            value,
            format!("a time after {last}, the last one taken"),
        ),
        Timing::KindChanged { value, accepted } => {
            let accepted = format!("{accepted}, which this link began with");
            Refusal::precondition(&path("kind"), value, accepted)
        }
        Timing::WidthChanged { value, accepted } => {
            let accepted = format!("{accepted}, which this link began with");
            Refusal::precondition(&path("bits"), value, accepted)
        }
        other => Refusal::invalid("measurement", "as sent", other),
    }
}
