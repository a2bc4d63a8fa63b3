//! Clocks, the links by which they are measured, and their estimates against house time.

use std::collections::{BTreeMap, BTreeSet};

use ratewright_timing::{Estimate, Outcome, State, compose, exact};
use serde::{Deserialize, Serialize};

use crate::link::{Lineage, LinkRecord};
use crate::{ClockDeclaration, ClockEstimate, HouseNs, Id, Reading, Reference, Refusal};

/// Most links of one clock.
pub(crate) const MAX_LINKS: usize = 8;
/// Longest chain of links from a clock to house time.
pub(crate) const MAX_DEPTH: usize = 4;
/// Prior of a clock without a declared tolerance, ppm, as a 95 % interval: crystals in equipment
/// are usually within ±100 ppm (common practice).
const COMMON_TOLERANCE_PPM: f64 = 100.0;
/// Another link replaces the chosen one only if its interval is this much narrower: every change
/// costs the ledgers a little certainty.
const CHANGE_OF_LINK: f64 = 0.8;

/// Correlation of phase and drift in an estimate, which estimates do not carry: √3/2 after a
/// straight line through white noise, 1/√2 in the steady state of a Kalman filter with a random
/// walk of the drift; the filter in use shows 0.65 to 0.84.
pub(crate) const PHASE_DRIFT_CORRELATION: f64 = 0.75;

/// A clock with its links and its users.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) struct ClockRecord {
    pub(crate) declaration: ClockDeclaration,
    pub(crate) links: Vec<LinkRecord>,
    /// The link whose estimate counts.
    chosen: usize,
    /// State that was last told.
    pub(crate) state: State,
    /// Crossings that use it.
    pub(crate) crossings: BTreeSet<Id>,
    /// Clocks that are measured against it.
    pub(crate) referrers: BTreeSet<Id>,
}

/// All clocks.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(crate) struct Clocks {
    records: BTreeMap<Id, ClockRecord>,
    /// Links begun so far, of all clocks: the source of [`Lineage`].
    links_begun: u32,
}

/// An estimate with the identity of the links it came by.
#[derive(Clone, Debug)]
pub(crate) struct Traced {
    pub(crate) estimate: Estimate,
    pub(crate) lineage: Lineage,
    pub(crate) measured: bool,
}

impl ClockRecord {
    fn new(declaration: ClockDeclaration) -> Self {
        let state = if declaration.exact {
            State::Locked
        } else {
            State::FreeRunning
        };
        ClockRecord {
            declaration,
            links: Vec::new(),
            chosen: 0,
            state,
            crossings: BTreeSet::new(),
            referrers: BTreeSet::new(),
        }
    }

    /// What is believed before anything is measured.
    fn prior(&self, now: HouseNs) -> Estimate {
        let mut declaration = self.declaration.clone();
        if declaration.tolerance_ppm == 0.0 {
            declaration.tolerance_ppm = COMMON_TOLERANCE_PPM;
        }
        ratewright_timing::Link::new(declaration.link_config())
            .expect("the declaration was checked when it came in")
            .estimate(now)
    }
}

impl Clocks {
    pub(crate) fn get(&self, id: &Id) -> Option<&ClockRecord> {
        self.records.get(id)
    }

    pub(crate) fn get_mut(&mut self, id: &Id) -> Option<&mut ClockRecord> {
        self.records.get_mut(id)
    }

    pub(crate) fn iter(&self) -> impl Iterator<Item = &ClockRecord> {
        self.records.values()
    }

    /// Creates or replaces; true if the clock's rate or exactness changed under its users.
    pub(crate) fn declare(&mut self, declaration: &ClockDeclaration) -> bool {
        let Some(record) = self.records.get_mut(&declaration.id) else {
            let record = ClockRecord::new(declaration.clone());
            self.records.insert(declaration.id.clone(), record);
            return false;
        };
        let old = std::mem::replace(&mut record.declaration, declaration.clone());
        let changed = old.nominal_hz != declaration.nominal_hz || old.exact != declaration.exact;
        if changed {
            let dropped = std::mem::take(&mut record.links);
            record.chosen = 0;
            for link in dropped {
                self.forget_referrer(&link.reference, &declaration.id);
            }
        }
        changed
    }

    /// Forgets a clock that the caller knows to be unused.
    pub(crate) fn delete(&mut self, id: &Id) {
        if let Some(record) = self.records.remove(id) {
            for link in record.links {
                self.forget_referrer(&link.reference, id);
            }
        }
    }

    fn forget_referrer(&mut self, reference: &Reference, id: &Id) {
        if let Reference::Clock(host) = reference
            && let Some(host) = self.records.get_mut(host)
        {
            host.referrers.remove(id);
        }
    }

    /// Takes a reading in. True with the outcome if the link is new.
    pub(crate) fn observe(
        &mut self,
        reading: &Reading,
        now: HouseNs,
    ) -> Result<(Outcome, bool), Refusal> {
        let record = self.accountable(reading)?;
        let known = record.links.iter().position(|link| link.is_of(reading));
        if let Some(index) = known {
            let next_lineage = self.links_begun + 1;
            let record = self
                .records
                .get_mut(&reading.clock)
                .expect("it was found above");
            let outcome = record.links[index].observe(reading, now, next_lineage)?;
            if record.links[index].lineage == next_lineage {
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
            None => record.links.push(link),
        }
    }

    /// Looks again which link of a clock counts: that with the narrowest interval.
    pub(crate) fn choose_link(&mut self, id: &Id, now: HouseNs) {
        let Some(record) = self.records.get(id) else {
            return;
        };
        if record.links.len() < 2 {
            return;
        }
        let width = |index: usize| self.by_link(&record.links[index], now, MAX_DEPTH);
        let widths: Vec<f64> = (0..record.links.len())
            .map(|index| {
                width(index)
                    .filter(|t| t.measured)
                    .map_or(f64::INFINITY, |t| t.estimate.half_width())
            })
            .collect();
        let chosen = record.chosen;
        let narrowest =
            (0..widths.len()).fold(
                chosen,
                |best, i| if widths[i] < widths[best] { i } else { best },
            );
        if widths[narrowest] < CHANGE_OF_LINK * widths[chosen] {
            self.records.get_mut(id).expect("it was found above").chosen = narrowest;
        }
    }

    /// The estimate of a clock against house time. `None` if there is no such clock.
    pub(crate) fn estimate(&self, id: &Id, now: HouseNs) -> Option<Traced> {
        self.chained(id, now, MAX_DEPTH)
    }

    fn chained(&self, id: &Id, now: HouseNs, depth: usize) -> Option<Traced> {
        let record = self.records.get(id)?;
        if record.declaration.exact {
            return Some(Traced {
                estimate: exact(now),
                lineage: Lineage::default(),
                measured: true,
            });
        }
        let by_chosen = record
            .links
            .get(record.chosen)
            .and_then(|link| self.by_link(link, now, depth));
        Some(by_chosen.unwrap_or_else(|| Traced {
            estimate: record.prior(now),
            lineage: Lineage::default(),
            measured: false,
        }))
    }

    /// The estimate by one link, composed with that of its reference.
    fn by_link(&self, link: &LinkRecord, now: HouseNs, depth: usize) -> Option<Traced> {
        let own = link.estimate(now);
        let Reference::Clock(host) = &link.reference else {
            return Some(Traced {
                estimate: own,
                lineage: Lineage::of(link.lineage),
                measured: true,
            });
        };
        let host = self.chained(host, now, depth.checked_sub(1)?)?;
        Some(Traced {
            estimate: compose(&own, &host.estimate),
            lineage: host.lineage.then(link.lineage),
            measured: host.measured,
        })
    }

    /// The same for people: with the reference and the probe it rests on.
    pub(crate) fn described(&self, id: &Id, now: HouseNs) -> Option<ClockEstimate> {
        let Traced {
            estimate, measured, ..
        } = self.estimate(id, now)?;
        let record = self.records.get(id)?;
        let link = record.links.get(record.chosen);
        Some(ClockEstimate {
            estimate,
            reference: link.map(|link| link.reference.clone()),
            probe: link.map(|link| link.probe.clone()),
            measured,
        })
    }
}
