//! Readings come in: which are taken, and when a link is begun for them.

use ratewright_timing::{Measurement, Outcome};

use crate::clocks::{ClockRecord, Clocks, MAX_DEPTH};
use crate::link::LinkRecord;
use crate::{HouseNs, Id, Reading, Reference, Refusal};

/// Most links of one clock.
const MAX_LINKS: usize = 8;
/// A reading against house time may be ahead of it by this much, ns (10 min): probes that keep
/// house time on another scale, or send a stretch of readings at once, stay well within it, and
/// no wrong time can have the honest ones after it refused as going back for much longer.
const AHEAD_NS: i64 = 600_000_000_000;

impl Clocks {
    /// Takes a reading in. True with the outcome if the link is new.
    pub(crate) fn observe(
        &mut self,
        reading: &Reading,
        now: HouseNs,
    ) -> Result<(Outcome, bool), Refusal> {
        let record = self.accountable(reading)?;
        let known = record.links.iter().position(|link| link.is_of(reading));
        self.check_not_ahead(reading, known.map(|index| &record.links[index]), now)?;
        if let Some(index) = known {
            let next_lineage = self.links_begun + 1;
            let record = self
                .records
                .get_mut(&reading.clock)
                .expect("it was found above");
            let link = &mut record.links[index];
            let outcome = link.observe(&record.declaration, reading, now, next_lineage)?;
            if link.lineage == next_lineage {
                self.links_begun = next_lineage;
            }
            return Ok((outcome, false));
        }
        let idle = self.check_new_link(record, reading, now)?;
        let (link, outcome) =
            LinkRecord::begin(&record.declaration, reading, now, self.links_begun + 1)?;
        self.links_begun += 1;
        self.add_link(&reading.clock, link, idle);
        self.choose_link(&reading.clock, now);
        Ok((outcome, true))
    }

    fn accountable(&self, reading: &Reading) -> Result<&ClockRecord, Refusal> {
        let known = "a clock that was declared";
        let Some(record) = self.records.get(&reading.clock) else {
            return Err(Refusal::not_found("clock", &reading.clock, known));
        };
        if record.declaration.exact {
            let accepted =
                "a clock that is not exact: an exact one is house time and needs no readings";
            return Err(Refusal::precondition("clock", &reading.clock, accepted));
        }
        if let Reference::Clock(host) = &reading.reference
            && !self.records.contains_key(host)
        {
            return Err(Refusal::not_found("reference", host, known));
        }
        Ok(record)
    }

    /// Refuses a reading far ahead of what its reference can show by now: once it was taken, the
    /// honest ones after it would be refused as going back.
    fn check_not_ahead(
        &self,
        reading: &Reading,
        link: Option<&LinkRecord>,
        now: HouseNs,
    ) -> Result<(), Refusal> {
        let latest_ns = match (&reading.reference, link) {
            (Reference::House, _) => now.saturating_add(AHEAD_NS),
            (Reference::Clock(host), Some(link)) if self.is_live(host) => {
                link.latest_reference_ns(now)
            }
            (Reference::Clock(_), _) => return Ok(()),
        };
        let reference_ns = reading.measurement.reference_ns();
        if reference_ns <= latest_ns {
            return Ok(());
        }
        let field = match reading.measurement {
            Measurement::Exchange { .. } => "measurement.t3_ns",
            _ => "measurement.reference_ns",
        };
        let accepted = format!("up to {latest_ns}, as far ahead as the reference may be by now");
        Err(Refusal::invalid(field, reference_ns, accepted))
    }

    /// False for an exact clock: a record read against one has a time base of its own, and comes
    /// in faster than its time goes by.
    fn is_live(&self, host: &Id) -> bool {
        self.records
            .get(host)
            .is_some_and(|record| !record.declaration.exact)
    }

    /// Checks that a link may be begun; gives the idle one whose place it takes, if there is need.
    fn check_new_link(
        &self,
        record: &ClockRecord,
        reading: &Reading,
        now: HouseNs,
    ) -> Result<Option<usize>, Refusal> {
        if let Reference::Clock(host) = &reading.reference {
            let above = self.height(host, &reading.clock);
            let below = self.users_depth(&reading.clock, MAX_DEPTH);
            let Some(above) = above else {
                let accepted = "a reference that is not itself measured against this clock";
                return Err(Refusal::invalid("reference", host, accepted));
            };
            if above + 1 + below > MAX_DEPTH {
                let accepted =
                    format!("a reference with at most {MAX_DEPTH} links to house time in all");
                return Err(Refusal::precondition("reference", host, accepted));
            }
        }
        if record.links.len() < MAX_LINKS {
            return Ok(None);
        }
        let oldest = record
            .links
            .iter()
            .enumerate()
            .min_by_key(|(_, link)| link.arrived_ns);
        match oldest {
            Some((index, link)) if link.is_abandoned(now) => Ok(Some(index)),
            _ => {
                let accepted =
                    format!("one of the {MAX_LINKS} probes of this clock, the most it can have");
                Err(Refusal::precondition("probe", &reading.probe, accepted))
            }
        }
    }

    /// Links in the longest chain from `id` to house time; none if it comes by `user`.
    fn height(&self, id: &Id, user: &Id) -> Option<usize> {
        if id == user {
            return None;
        }
        let mut height = 0;
        for link in self.records.get(id).map_or(&[][..], |record| &record.links) {
            height = height.max(match &link.reference {
                Reference::House => 1,
                Reference::Clock(host) => 1 + self.height(host, user)?,
            });
        }
        Some(height)
    }

    /// Longest chain of clocks that are measured by way of `id`, counted up to `most`.
    fn users_depth(&self, id: &Id, most: usize) -> usize {
        let referrers = self.records.get(id).map(|record| &record.referrers);
        match referrers {
            Some(ids) if most > 0 => ids
                .iter()
                .map(|user| 1 + self.users_depth(user, most - 1))
                .max()
                .unwrap_or(0),
            _ => 0,
        }
    }

    fn add_link(&mut self, id: &Id, link: LinkRecord, idle: Option<usize>) {
        if let Reference::Clock(host) = &link.reference
            && let Some(host) = self.records.get_mut(host)
        {
            host.referrers.insert(id.clone());
        }
        let record = self.records.get_mut(id).expect("the caller has found it");
        match idle {
            Some(index) => {
                let gone = std::mem::replace(&mut record.links[index], link).reference;
                if record.links.iter().all(|kept| kept.reference != gone) {
                    self.forget_referrer(&gone, id);
                }
            }
            None => {
                record.links.reserve_exact(1); // most clocks have one link
                record.links.push(link);
            }
        }
    }
}
