//! Clocks, the links by which they are measured, and their estimates against house time.

use std::collections::{BTreeMap, BTreeSet};

use ratewright_timing::{Estimate, State, compose, exact};
use serde::{Deserialize, Serialize};

use crate::link::{Lineage, LinkRecord, Reads, Restart};
use crate::schedule::NEVER;
use crate::statistics::Statistics;
use crate::{ClockDeclaration, ClockEstimate, ClockFault, HouseNs, Id, Reference};

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
    chosen: u32,
    /// When it is looked at next.
    pub(crate) due_ns: HouseNs,
    /// State that was last told.
    pub(crate) state: State,
    /// What is wrong with it.
    pub(crate) fault: Option<Box<ClockFault>>,
    pub(crate) statistics: Option<Box<Statistics>>,
    /// Crossings that use it.
    pub(crate) crossings: BTreeSet<Id>,
    /// Clocks that are measured against it.
    pub(crate) referrers: BTreeSet<Id>,
}

/// All clocks.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(crate) struct Clocks {
    /// Boxed, as a map's nodes are half empty.
    pub(crate) records: BTreeMap<Id, Box<ClockRecord>>,
    /// Links begun so far, of all clocks: the source of [`Lineage`].
    pub(crate) links_begun: u32,
}

/// An estimate with the identity of the links it came by.
#[derive(Clone, Debug)]
pub(crate) struct Traced {
    pub(crate) estimate: Estimate,
    pub(crate) lineage: Lineage,
    pub(crate) measured: bool,
    /// How the last of the links that did began anew.
    pub(crate) restart: Option<Restart>,
    /// True once every one of the links is past its beginning, see [`LinkRecord::is_settled`].
    pub(crate) settled: bool,
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
            due_ns: NEVER,
            state,
            fault: None,
            statistics: None,
            crossings: BTreeSet::new(),
            referrers: BTreeSet::new(),
        }
    }

    /// True if the estimate rests on this link.
    pub(crate) fn counts(&self, link: usize) -> bool {
        link == self.chosen as usize
    }

    /// What is believed before anything is measured.
    fn prior(&self, now: HouseNs) -> Estimate {
        let mut declaration = self.declaration.clone();
        if declaration.tolerance_ppm == 0.0 && declaration.oscillator.is_none() {
            declaration.tolerance_ppm = COMMON_TOLERANCE_PPM;
        }
        ratewright_timing::Link::new(declaration.link_config())
            .expect("the declaration was checked when it came in")
            .estimate(now)
    }
}

impl Clocks {
    pub(crate) fn get(&self, id: &Id) -> Option<&ClockRecord> {
        self.records.get(id).map(Box::as_ref)
    }

    pub(crate) fn get_mut(&mut self, id: &Id) -> Option<&mut ClockRecord> {
        self.records.get_mut(id).map(Box::as_mut)
    }

    pub(crate) fn iter(&self) -> impl Iterator<Item = &ClockRecord> {
        self.records.values().map(Box::as_ref)
    }

    /// Creates or replaces; true if the clock's rate or exactness changed under its users.
    pub(crate) fn declare(&mut self, declaration: &ClockDeclaration) -> bool {
        let Some(record) = self.records.get_mut(&declaration.id) else {
            let record = ClockRecord::new(declaration.clone());
            self.records
                .insert(declaration.id.clone(), Box::new(record));
            return false;
        };
        let old = std::mem::replace(&mut record.declaration, declaration.clone());
        let changed = old.nominal_hz != declaration.nominal_hz || old.exact != declaration.exact;
        if changed {
            let dropped = std::mem::take(&mut record.links);
            record.chosen = 0;
            record.fault = None;
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

    pub(crate) fn forget_referrer(&mut self, reference: &Reference, id: &Id) {
        if let Reference::Clock(host) = reference
            && let Some(host) = self.records.get_mut(host)
        {
            host.referrers.remove(id);
        }
    }

    /// Looks again which link of a clock counts: that with the narrowest interval. Timestamps that
    /// come from another clock never do.
    pub(crate) fn choose_link(&mut self, id: &Id, now: HouseNs) {
        let Some(record) = self.records.get(id) else {
            return;
        };
        if record.links.len() < 2 {
            return;
        }
        let is_foreign = |link: &LinkRecord| {
            link.reads == Reads::Timestamps
                && matches!(
                    record.fault.as_deref(),
                    Some(ClockFault::ForeignTimestamps { .. })
                )
        };
        let width = |index: usize| {
            let link = Some(&record.links[index]).filter(|link| !is_foreign(link))?;
            self.by_link(link, now, MAX_DEPTH)
        };
        let widths: Vec<f64> = (0..record.links.len())
            .map(|index| {
                width(index)
                    .filter(|t| t.measured)
                    .map_or(f64::INFINITY, |t| t.estimate.half_width())
            })
            .collect();
        let chosen = record.chosen as usize;
        let narrowest =
            (0..widths.len()).fold(
                chosen,
                |best, i| if widths[i] < widths[best] { i } else { best },
            );
        if widths[narrowest] < CHANGE_OF_LINK * widths[chosen] {
            self.records.get_mut(id).expect("it was found above").chosen = narrowest as u32;
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
                restart: None,
                settled: true,
            });
        }
        let by_chosen = record
            .links
            .get(record.chosen as usize)
            .and_then(|link| self.by_link(link, now, depth));
        Some(by_chosen.unwrap_or_else(|| Traced {
            estimate: record.prior(now),
            lineage: Lineage::default(),
            measured: false,
            restart: None,
            settled: false,
        }))
    }

    /// The estimate by one link, composed with that of its reference.
    pub(crate) fn by_link(&self, link: &LinkRecord, now: HouseNs, depth: usize) -> Option<Traced> {
        let own = link.estimate(now);
        let Reference::Clock(host) = &link.reference else {
            return Some(Traced {
                estimate: own,
                lineage: Lineage::of(link.lineage),
                measured: true,
                restart: link.restart.as_deref().copied(),
                settled: link.is_settled(),
            });
        };
        let host = self.chained(host, now, depth.checked_sub(1)?)?;
        Some(Traced {
            estimate: compose(&own, &host.estimate),
            lineage: host.lineage.then(link.lineage),
            measured: host.measured,
            restart: host.restart.max(link.restart.as_deref().copied()),
            settled: host.settled && link.is_settled(),
        })
    }

    /// The same for people: with the reference and the probe it rests on.
    pub(crate) fn described(&self, id: &Id, now: HouseNs) -> Option<ClockEstimate> {
        let Traced {
            mut estimate,
            measured,
            ..
        } = self.estimate(id, now)?;
        let record = self.records.get(id)?;
        let link = record.links.get(record.chosen as usize);
        if let Some(link) = link {
            // People ask when and how often this clock was read, not its reference.
            let own = link.estimate(now);
            estimate.last_reading_ns = Some(link.arrived_ns);
            (estimate.rows_used, estimate.outliers) = (own.rows_used, own.outliers);
        }
        Some(ClockEstimate {
            estimate,
            reference: link.map(|link| link.reference.clone()),
            probe: link.map(|link| link.probe.clone()),
            measured,
            fault: record.fault.as_deref().copied(),
        })
    }
}
