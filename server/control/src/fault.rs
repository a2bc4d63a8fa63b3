//! Faults of clocks: what is measured of one clock in two ways must agree.

use ratewright_timing::{Estimate, State};

use crate::clocks::{Clocks, MAX_DEPTH};
use crate::link::{LinkRecord, Reads};
use crate::{ClockFault, HouseNs, Id, Transition};

/// Two drifts further apart than so many times their 95 % half-widths are those of two clocks.
const APART: f64 = 3.0;
/// Once they were, they must be as near as this to count as those of one again.
const TOGETHER: f64 = 1.5;

impl Clocks {
    /// Looks whether a clock's timestamps run with its samples; tells what became different.
    pub(crate) fn check_timestamps(&mut self, id: &Id, now: HouseNs) -> Option<Transition> {
        let record = self.get(id)?;
        let reads = |reads| record.links.iter().filter(move |link| link.reads == reads);
        let was_found = matches!(
            record.fault.as_deref(),
            Some(ClockFault::ForeignTimestamps { .. })
        );
        let has_both =
            reads(Reads::Timestamps).next().is_some() && reads(Reads::Samples).next().is_some();
        if !has_both {
            return if was_found {
                self.set_fault(id, None)
            } else {
                None
            };
        }
        let timestamps = self.sharpest(reads(Reads::Timestamps), now)?;
        let samples = self.sharpest(reads(Reads::Samples), now)?;
        let apart = (timestamps.drift - samples.drift).abs();
        let half_width = timestamps.half_width().hypot(samples.half_width());
        let fault = ClockFault::ForeignTimestamps {
            timestamps: timestamps.drift,
            samples: samples.drift,
            deviation: timestamps.deviation.hypot(samples.deviation),
        };
        match was_found {
            false if apart > APART * half_width => self.set_fault(id, Some(fault)),
            true if apart < TOGETHER * half_width => self.set_fault(id, None),
            _ => None,
        }
    }

    /// The narrowest estimate by one of these links, of those that are read now.
    fn sharpest<'a>(
        &self,
        links: impl Iterator<Item = &'a LinkRecord>,
        now: HouseNs,
    ) -> Option<Estimate> {
        let estimates = links.filter_map(|link| self.by_link(link, now, MAX_DEPTH));
        estimates
            .filter(|traced| traced.measured)
            .map(|traced| traced.estimate)
            .filter(|estimate| matches!(estimate.state, State::Acquiring | State::Locked))
            .min_by(|a, b| a.half_width().total_cmp(&b.half_width()))
    }

    /// Notes a fault, or that it is gone.
    pub(crate) fn set_fault(&mut self, id: &Id, fault: Option<ClockFault>) -> Option<Transition> {
        let record = self.get_mut(id)?;
        record.fault = fault.map(Box::new);
        Some(Transition::ClockFault {
            clock: id.clone(),
            fault,
        })
    }
}
