//! What becomes of a crossing whose follower does not heed its settings, or may not, or whose levels
//! speak against its readings.

use crate::CrossingState;
use crate::HouseNs;
use crate::policy::RECOVERY_S;
use crate::policy::standing::Standing;
use crate::record::{CrossingRecord, Ends};

/// A follower that reports what it applies does so within this time, ns (30 s); without its word
/// from then on nobody knows what runs.
pub(crate) const REPORTED_WITHIN_NS: i64 = 30_000_000_000;

impl CrossingRecord {
    /// Why it is not certain, at the account's last advance, that all is as the readings and the
    /// newest setting say.
    pub(crate) fn doubt(&self, ends: &Ends) -> Option<Standing> {
        if let Some(heard) = self.ledger.heard().filter(|heard| heard.is_contradicted) {
            let ppm = 1e6 * heard.velocity / ends.target.nominal_sink_hz;
            let reason = format!(
                "the follower's levels speak against the readings of its clocks, by {ppm:+.3} ppm: they \
                 alone are believed"
            );
            return Some(Standing::new(CrossingState::Degraded, reason));
        }
        let newest = self.newest.as_ref()?;
        let name = format!("setting {}-{}", newest.epoch, newest.number);
        let timeline = &self.ledger.timeline;
        let reason = if timeline.unheeded().is_some() {
            let phase = self.ledger.phase_samples();
            let ratio = timeline.last_ratio()?;
            let velocity = self.ledger.velocity(ratio, &ends.source, &ends.sink);
            format!(
                "{name} is not heeded: by the follower's levels what ran before still does, and the phase \
                 error of {phase:.3} samples moves by {velocity:+.2e} a second"
            )
        } else {
            let (_, phase) = self.unreported(ends)?;
            format!(
                "{name} was not reported as applied: if what ran before still does, the phase error is \
                 {phase:.3} samples by now"
            )
        };
        Some(Standing::new(CrossingState::Degraded, reason))
    }

    /// The ratio that may still run, as the newest setting was not reported, and its phase error.
    pub(crate) fn unreported(&self, ends: &Ends) -> Option<(f64, f64)> {
        self.ledger
            .unreported(REPORTED_WITHIN_NS, &ends.source, &ends.sink)
    }

    /// True while a setting that is not heeded is as good for a follower that takes it up as it was
    /// meant to be: others would only follow it unheard.
    pub(crate) fn waits_to_be_heeded(&self, now: HouseNs) -> bool {
        let newest = self.newest.as_ref();
        let is_unheeded = self.ledger.timeline.unheeded().is_some();
        newest.filter(|_| is_unheeded).is_some_and(|newest| {
            let good_s = newest.evidence.expected_hold_s.max(RECOVERY_S);
            now < newest.effect_ns.saturating_add((good_s * 1e9) as i64)
        })
    }
}
