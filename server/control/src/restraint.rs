//! What keeps a crossing from changing though another setting would be better: that it is pinned, or
//! the floor between two changes. A group changes together or not at all, so what keeps one member
//! keeps all of it.

use std::fmt;

use crate::policy::standing::Standing;
use crate::record::{CrossingRecord, Ends, Judgement};
use crate::{CrossingState, HouseNs, Id, Reason};

/// Why a change that is due has to wait.
#[derive(Clone, Debug, PartialEq)]
pub(crate) enum Restraint {
    /// An operator has pinned the crossing.
    Pin { crossing: Id, by: String },
    /// The change before it is too short ago.
    Floor { earliest_ns: HouseNs, now: HouseNs },
}

impl Restraint {
    /// The weightier of two: a pin, else the later floor.
    pub(crate) fn with(self, other: Option<Restraint>) -> Restraint {
        match (&self, &other) {
            (Restraint::Pin { .. }, _) | (_, None) => self,
            (
                Restraint::Floor { earliest_ns, .. },
                Some(Restraint::Floor {
                    earliest_ns: later_ns,
                    ..
                }),
            ) if earliest_ns >= later_ns => self,
            (Restraint::Floor { .. }, Some(_)) => other.unwrap_or(self),
        }
    }

    /// True if a setting for this reason is made all the same: a crossing begins under any
    /// restraint, and a floor is for what the engine would do by itself.
    fn lets_pass(&self, reason: Reason) -> bool {
        match self {
            Restraint::Pin { .. } => reason == Reason::First,
            Restraint::Floor { .. } => matches!(
                reason,
                Reason::First | Reason::Declaration | Reason::ChangeOver
            ),
        }
    }
}

impl fmt::Display for Restraint {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Restraint::Pin { crossing, by } => write!(f, "{crossing} is pinned by {by}"),
            Restraint::Floor { earliest_ns, now } => {
                let left_s = earliest_ns.saturating_sub(*now) as f64 * 1e-9;
                write!(
                    f,
                    "the floor between changes leaves {left_s:.1} s until another setting may take effect"
                )
            }
        }
    }
}

impl CrossingRecord {
    /// What keeps this crossing from a change that would take effect `lead_ns` from now.
    pub(crate) fn restraint(&self, now: HouseNs, lead_ns: i64) -> Option<Restraint> {
        if let Some(pin) = &self.pin {
            return Some(Restraint::Pin {
                crossing: self.id().clone(),
                by: pin.by.clone(),
            });
        }
        let earliest_ns = self.floor_ns();
        let is_early = now.saturating_add(lead_ns) < earliest_ns;
        is_early.then_some(Restraint::Floor { earliest_ns, now })
    }

    /// The earliest effect that the floor between changes allows.
    fn floor_ns(&self) -> HouseNs {
        match self.declaration.least_hold_ns {
            0 => HouseNs::MIN,
            least_ns => self.changed_ns.saturating_add(least_ns),
        }
    }

    /// Time from now until a decision is no longer too early for the floor, if it is now, ns.
    pub(crate) fn floor_ends_in_ns(&self, now: HouseNs, lead_ns: i64) -> Option<i64> {
        let decision_ns = self.floor_ns().saturating_sub(lead_ns);
        (decision_ns > now).then(|| decision_ns.saturating_sub(now))
    }

    /// What was judged, under a restraint: a change that has to wait becomes a stay that says so,
    /// and a stay says that it is pinned.
    pub(crate) fn restrained(
        &self,
        judgement: Judgement,
        restraint: &Restraint,
        (now, lead_s): (HouseNs, f64),
        ends: &Ends,
    ) -> Judgement {
        match judgement {
            Judgement::Change { choice, reason } if !restraint.lets_pass(reason) => {
                let standing = self.standing_of_now(now, ends, lead_s, choice.standing);
                let reason = format!(
                    "{restraint}, though another setting is due; {}",
                    standing.reason
                );
                Judgement::Stay(Standing { reason, ..standing })
            }
            Judgement::Stay(standing) if matches!(restraint, Restraint::Pin { .. }) => {
                let reason = format!("{restraint}; {}", standing.reason);
                Judgement::Stay(Standing { reason, ..standing })
            }
            other => other,
        }
    }

    /// How a crossing stands that is not changed as it should be, for whose change `chosen` would
    /// be the standing: the phase error is vouched for no longer than its band is in the tube.
    fn standing_of_now(
        &self,
        now: HouseNs,
        ends: &Ends,
        lead_s: f64,
        chosen: Standing,
    ) -> Standing {
        if chosen.state == CrossingState::Waiting {
            return chosen;
        }
        if let Some(doubt) = self.doubt(ends) {
            return doubt;
        }
        let outlook = self.outlook(ends);
        let view = self.view(now, &outlook, ends, lead_s);
        let standing = view.standing(view.velocity, view.running_error);
        if standing.state != CrossingState::Holding || view.is_in_tube() {
            return standing;
        }
        let reason = format!(
            "the phase error of {:.3} samples is about to leave what planning may use of the headroom",
            outlook.phase
        );
        Standing::new(CrossingState::Degraded, reason)
    }
}
