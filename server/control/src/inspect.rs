//! A close look at one clock or one crossing, for people: what a page or a log shows of it beyond
//! its status. It changes nothing, and nothing is decided by it.

use ratewright_timing::{Diagnosis, Estimate, Event, EventCounts};

use crate::engine::Engine;
use crate::timeline::as_double;
use crate::{HouseNs, Id, Reference};

/// One link of a clock: the clock as one probe reads it.
#[derive(Clone, Debug, PartialEq)]
pub struct LinkView {
    /// What it is read against.
    pub reference: Reference,
    /// The probe that reads it.
    pub probe: String,
    /// True if the clock's estimate rests on this link.
    pub counts: bool,
    /// What the probe's readings say, against the link's own reference; its times are the
    /// reference's.
    pub estimate: Estimate,
    /// What the estimator makes of the probe.
    pub diagnosis: Diagnosis,
    /// How often each event was found.
    pub events: EventCounts,
    /// The last event, with its house time.
    pub last_event: Option<(Event, HouseNs)>,
    /// House time at which the newest reading arrived.
    pub arrived_ns: HouseNs,
}

/// How the phase error goes on if nothing is measured and nothing set anew.
#[derive(Clone, Debug, PartialEq)]
pub struct PhaseForecast {
    /// Where the band is out: the headroom, less what the setting errs by within a block; sink
    /// samples.
    pub room_samples: f64,
    /// In the order that was asked for.
    pub points: Vec<PhasePoint>,
}

/// The phase error at one time of a forecast.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct PhasePoint {
    /// Seconds from now.
    pub after_s: f64,
    /// Phase error, sink samples.
    pub phase_samples: f64,
    /// Its standard deviation, sink samples.
    pub deviation_samples: f64,
}

impl Engine {
    /// The links of a clock, the one that counts first; none for an exact clock and one never
    /// measured, `None` if there is no such clock.
    pub fn links(&self, clock: &Id, now: HouseNs) -> Option<Vec<LinkView>> {
        let now = now.max(self.now_ns);
        let record = self.clocks.get(clock)?;
        let mut views: Vec<LinkView> = record
            .links
            .iter()
            .enumerate()
            .map(|(index, link)| LinkView {
                counts: record.counts(index),
                ..link.view(now)
            })
            .collect();
        views.sort_by(|a, b| (!a.counts, &a.probe).cmp(&(!b.counts, &b.probe)));
        Some(views)
    }

    /// The phase error of a crossing at times from now on, seconds, under the ratio in force and
    /// from its effect on under the newest setting. `None` if there is no such crossing or it has
    /// no setting.
    ///
    /// The first time at which `|phase_samples| + 1.96 deviation_samples` reaches `room_samples`
    /// is the status's time to slip.
    pub fn phase_forecast(
        &self,
        crossing: &Id,
        now: HouseNs,
        after_s: &[f64],
    ) -> Option<PhaseForecast> {
        let now = now.max(self.now_ns);
        let ends = self.ends(crossing, now)?;
        let mut record = self.crossings.get(crossing)?.clone();
        record.advance(now, &ends);
        let newest = record.newest.as_ref()?;
        let outlook = record.outlook(&ends);
        let timeline = &record.ledger.timeline;
        // Before the stream begins nothing gains.
        let runs = timeline.begins_ns().is_some_and(|begins| begins <= now);
        let in_force = timeline.ratio_at(now).filter(|_| runs);
        let before = in_force.map_or(0.0, |ratio| outlook.velocity(ratio));
        let then = match timeline.unheeded() {
            Some(_) => before,
            None => outlook.velocity(as_double(&newest.average())),
        };
        let until_effect_s = newest.effect_ns.saturating_sub(now).max(0) as f64 * 1e-9;
        let point = |after_s: f64| {
            let under_before = after_s.min(until_effect_s);
            let gained = before * under_before + then * (after_s - under_before);
            PhasePoint {
                after_s,
                phase_samples: outlook.extrapolate(outlook.phase + gained, 0.0, after_s),
                deviation_samples: outlook.deviation(after_s),
            }
        };
        Some(PhaseForecast {
            room_samples: record.declaration.headroom_samples - newest.error(),
            points: after_s.iter().map(|&after_s| point(after_s)).collect(),
        })
    }
}
