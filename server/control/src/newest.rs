//! The newest setting of a crossing, kept without what can be worked out again.

use ratewright_ratio::{
    Bracket, Cadence, Certificate, Fraction, Node, Reason as Unproven, Stepping, exact,
};
use serde::{Deserialize, Serialize};

use crate::policy::CARRIED_SAMPLES;
use crate::policy::realise::pair_error;
use crate::timeline::as_double;
use crate::{Evidence, HouseNs, Id, Realised, Reason, Setting};

/// A setting, but for its crossing.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) struct Newest {
    pub(crate) epoch: u64,
    pub(crate) number: u64,
    wanted: Fraction,
    run: Run,
    residual: f64,
    decided_ns: HouseNs,
    pub(crate) effect_ns: HouseNs,
    pub(crate) review_ns: HouseNs,
    expiry_ns: HouseNs,
    /// Infinite if no slip is foreseen.
    seconds_to_slip: f64,
    reason: Reason,
    on_backup: bool,
    silent: bool,
    pub(crate) evidence: Evidence,
}

/// What is run, with its proof.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
enum Run {
    Single {
        ratio: Fraction,
        certificate: Certificate,
    },
    /// Two ratios in turn, balanced if there is no swing, and neighbours if that is not unproven.
    InTurn {
        low: Fraction,
        high: Fraction,
        swing_samples: Option<f64>,
        unproven: Option<Unproven>,
    },
    Stepping {
        phases: u64,
    },
}

impl Run {
    fn of(setting: &Setting) -> Self {
        let certificate = setting.certificate;
        let in_turn = |cadence: Cadence, swing_samples| Run::InTurn {
            low: cadence.low(),
            high: cadence.high(),
            swing_samples,
            unproven: match certificate {
                Certificate::Uncertified(reason) => Some(reason),
                _ => None,
            },
        };
        match setting.realised {
            Realised::Single(ratio) => Run::Single { ratio, certificate },
            Realised::Stepping(stepping) => Run::Stepping {
                phases: stepping.phases(),
            },
            Realised::Cadence(cadence) => in_turn(cadence, None),
            Realised::Lazy {
                cadence,
                swing_samples,
            } => in_turn(cadence, Some(swing_samples)),
        }
    }
}

impl Newest {
    pub(crate) fn of(setting: &Setting) -> Self {
        Newest {
            epoch: setting.epoch,
            number: setting.number,
            wanted: setting.wanted,
            run: Run::of(setting),
            residual: setting.residual,
            decided_ns: setting.decided_ns,
            effect_ns: setting.effect_ns,
            review_ns: setting.review_ns,
            expiry_ns: setting.expiry_ns,
            seconds_to_slip: setting.seconds_to_slip.unwrap_or(f64::INFINITY),
            reason: setting.reason,
            on_backup: setting.on_backup,
            silent: setting.silent,
            evidence: setting.evidence.clone(),
        }
    }

    /// The setting, of the crossing that it is for.
    pub(crate) fn setting(&self, crossing: &Id) -> Setting {
        Setting {
            crossing: crossing.clone(),
            epoch: self.epoch,
            number: self.number,
            wanted: self.wanted,
            realised: self.realised(),
            residual: self.residual,
            certificate: self.certificate(),
            decided_ns: self.decided_ns,
            effect_ns: self.effect_ns,
            review_ns: self.review_ns,
            expiry_ns: self.expiry_ns,
            seconds_to_slip: Some(self.seconds_to_slip).filter(|s| s.is_finite()),
            reason: self.reason,
            on_backup: self.on_backup,
            silent: self.silent,
            evidence: self.evidence.clone(),
        }
    }

    pub(crate) fn realised(&self) -> Realised {
        match self.run {
            Run::Single { ratio, .. } => Realised::Single(ratio),
            Run::Stepping { phases } => Realised::Stepping(self.stepping(phases)),
            Run::InTurn {
                low,
                high,
                swing_samples,
                ..
            } => {
                let cadence = Cadence::of_pair(&exact(&self.wanted), low, high)
                    .expect("it was made of the same");
                swing_samples.map_or(Realised::Cadence(cadence), |swing_samples| Realised::Lazy {
                    cadence,
                    swing_samples,
                })
            }
        }
    }

    fn certificate(&self) -> Certificate {
        match self.run {
            Run::Single { certificate, .. } => certificate,
            Run::InTurn {
                unproven: Some(reason),
                ..
            } => Certificate::Uncertified(reason),
            Run::InTurn { low, high, .. } => Certificate::NeighbourPair(Bracket {
                below: Node::from(&low),
                above: Node::from(&high),
            }),
            Run::Stepping { phases } => self.stepping(phases).certificate(),
        }
    }

    fn stepping(&self, phases: u64) -> Stepping {
        Stepping::new(&exact(&self.wanted), phases).expect("it was made of the same")
    }

    /// The long-run average ratio, see [`Setting::average`].
    pub(crate) fn average(&self) -> Fraction {
        match self.run {
            Run::Single { ratio, .. } => ratio,
            Run::InTurn { .. } | Run::Stepping { .. } => self.wanted,
        }
    }

    /// What its running error may be off by, samples.
    pub(crate) fn error(&self) -> f64 {
        match self.run {
            Run::Single { .. } => 0.0,
            Run::Stepping { phases } => as_double(&self.wanted) / phases as f64,
            Run::InTurn {
                swing_samples: Some(swing_samples),
                ..
            } => swing_samples + CARRIED_SAMPLES,
            Run::InTurn { low, high, .. } => pair_error(&low, &high),
        }
    }

    /// Input samples of the longest block of what is run: it may change at block ends only. A table
    /// of phases may change at any output.
    pub(crate) fn block_inputs(&self) -> u64 {
        match self.run {
            Run::Single { ratio, .. } => *ratio.denom(),
            Run::Stepping { .. } => 1,
            Run::InTurn { low, high, .. } => *low.denom().max(high.denom()),
        }
    }
}
