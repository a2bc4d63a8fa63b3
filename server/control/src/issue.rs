//! Issuing settings: a choice becomes a numbered decision with its evidence.

use ratewright_ratio::{Fraction, residual};

use crate::newest::Newest;
use crate::policy::choose::Choice;
use crate::policy::realise::{Way, error_of};
use crate::policy::slip::{seconds_to_slip, seconds_vouched};
use crate::policy::standing::Standing;
use crate::record::{CrossingRecord, Ends};
use crate::timeline::{self, as_double};
use crate::{Evidence, HouseNs, Realised, Reason, Setting};

/// When a setting is decided and takes effect, and under which epoch it is numbered.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(crate) struct Stamp {
    pub(crate) epoch: u64,
    pub(crate) decided_ns: HouseNs,
    pub(crate) effect_ns: HouseNs,
}

impl CrossingRecord {
    /// Makes a setting of a choice; its effect is not before that of the setting before it.
    pub(crate) fn issue(
        &mut self,
        choice: Choice,
        reason: Reason,
        stamp: Stamp,
        ends: &Ends,
    ) -> Setting {
        let earliest_ns = self
            .ledger
            .timeline
            .last_effect_ns()
            .unwrap_or(HouseNs::MIN);
        let effect_ns = stamp.effect_ns.max(earliest_ns);
        let review_ns = effect_ns.saturating_add(self.declaration.review_horizon_ns);
        let mut setting = Setting {
            crossing: self.id().clone(),
            epoch: stamp.epoch,
            number: self.last_number + 1,
            wanted: choice.way.wanted,
            realised: choice.way.realised,
            residual: 0.0,
            certificate: choice.way.certificate,
            decided_ns: stamp.decided_ns,
            effect_ns,
            review_ns,
            expiry_ns: review_ns.saturating_add(self.declaration.review_horizon_ns),
            seconds_to_slip: None,
            reason,
            on_backup: self.on_backup,
            silent: self.declaration.silent,
            evidence: self.evidence(&choice, ends),
        };
        setting.residual = residual(&setting.average(), &ends.target.exact);
        let path = (setting.effect_ns, setting.average());
        let room = self.declaration.headroom_samples - error_of(&setting.realised);
        setting.seconds_to_slip = self.slip_under(path, room, stamp.decided_ns, ends);
        self.take(setting.clone());
        setting
    }

    /// Confirms the newest setting under a new number.
    pub(crate) fn renew(&mut self, newest: &Setting, stamp: Stamp, ends: &Ends) -> Setting {
        let confirmed = Choice {
            way: Way {
                wanted: newest.wanted,
                realised: newest.realised,
                certificate: newest.certificate,
            },
            allowed: (newest.evidence.allowed_low, newest.evidence.allowed_high),
            hold_s: newest.evidence.expected_hold_s,
            standing: Standing::new(self.state, String::new()),
            recovers: false,
        };
        self.issue(confirmed, Reason::Renewal, stamp, ends)
    }

    fn take(&mut self, setting: Setting) {
        let before = self.newest.as_ref().map(Newest::average);
        let is_single = |realised: &Realised| matches!(realised, Realised::Single(_));
        if !is_single(&setting.realised) {
            self.ledger.leave_error(0.0);
        } else if self.running_error() > 0.0 {
            self.ledger.leave_error(self.running_error());
        }
        if self.newest.as_ref().map(Newest::realised) != Some(setting.realised) {
            self.changed_ns = setting.effect_ns;
        }
        let is_change = before.is_some_and(|before| before != setting.average());
        self.changes_made = self.changes_made.saturating_add(u32::from(is_change));
        self.settings_made = self.settings_made.saturating_add(1);
        self.last_number = setting.number;
        self.forced = None;
        self.ledger.set(timeline::Entry {
            epoch: setting.epoch,
            number: setting.number,
            ratio: setting.average(),
            decided_ns: setting.decided_ns,
            effect_ns: setting.effect_ns,
            is_reported: false,
        });
        self.newest = Some(Newest::of(&setting));
        debug_assert_eq!(
            self.newest.as_ref().map(|n| n.setting(self.id())),
            Some(setting)
        );
    }

    fn evidence(&self, choice: &Choice, ends: &Ends) -> Evidence {
        let outlook = self.outlook(ends);
        let (source, sink) = (&ends.source.estimate, &ends.sink.estimate);
        Evidence {
            target: ends.target.value,
            target_low: ends.target.low,
            target_high: ends.target.high,
            source_drift: source.drift,
            source_deviation: source.deviation,
            sink_drift: sink.drift,
            sink_deviation: sink.deviation,
            phase_error_samples: outlook.phase,
            phase_deviation_samples: outlook.deviation(0.0),
            allowed_low: choice.allowed.0,
            allowed_high: choice.allowed.1,
            expected_hold_s: choice.hold_s,
        }
    }

    /// Seconds from the effect of a setting with this average (or from `now`, if that is later) to the slip it leads to: or
    /// that what runs instead leads to, if it is not heeded or may not be.
    pub(crate) fn slip_under(
        &self,
        (effect_ns, average): (HouseNs, Fraction),
        room: f64,
        now: HouseNs,
        ends: &Ends,
    ) -> Option<f64> {
        let outlook = self.outlook(ends);
        let timeline = &self.ledger.timeline;
        // Before the stream begins nothing gains, and nothing becomes uncertain.
        let runs = timeline
            .begins_ns()
            .is_some_and(|begins_ns| begins_ns <= now);
        let in_force = timeline.ratio_at(now).filter(|_| runs);
        let velocity = in_force.map_or(0.0, |ratio| outlook.velocity(ratio));
        let lead_ns = effect_ns.saturating_sub(now).max(0);
        let delay_s = if runs { lead_ns as f64 * 1e-9 } else { 0.0 };
        let phase = outlook.extrapolate(outlook.phase, velocity, delay_s);
        let slip = |path| seconds_to_slip(&outlook, room, path, delay_s);
        if timeline.unheeded().is_some() {
            return slip((phase, velocity));
        }
        let unreported = self.unreported(ends);
        let otherwise =
            unreported.and_then(|(ratio, phase)| slip((phase, outlook.velocity(ratio))));
        let planned = slip((phase, outlook.velocity(as_double(&average))));
        match (planned, otherwise) {
            (Some(planned), Some(otherwise)) => Some(planned.min(otherwise)),
            (planned, otherwise) => planned.or(otherwise),
        }
    }

    /// Seconds for which this account, which is advanced to now, can be vouched for without a further reading,
    /// within [`crate::SLIP_HORIZON_S`].
    pub(crate) fn vouched(&self, ends: &Ends) -> Option<f64> {
        let room = self.declaration.headroom_samples - self.running_error();
        seconds_vouched(&self.outlook(ends), room)
    }
}
