//! Settings: decisions as they are published, stored and proved.

use ratewright_ratio::{
    Bounds, Cadence, Certificate, CertificateError, Claim, Fraction, Interval, Node, Side,
    Stepping, exact,
};
use serde::{Deserialize, Serialize};

use crate::{HouseNs, Id};

/// One decision for a crossing. Immutable; (epoch, number) rises and is never used twice.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Setting {
    /// The crossing it is for.
    pub crossing: Id,
    /// Epoch of the numbering.
    pub epoch: u64,
    /// Number within the crossing, from 1.
    pub number: u64,
    /// The long-run ratio that is wanted: L output samples for M input samples. A crossing that
    /// keeps to its bounds may realise it only nearly, see [`Setting::average`].
    pub wanted: Fraction,
    /// What the resampler is to do.
    pub realised: Realised,
    /// `average/target − 1`, signed, dimensionless.
    pub residual: f64,
    /// Proof of the choice, see [`Setting::verify`].
    pub certificate: Certificate,
    /// When it was decided.
    pub decided_ns: HouseNs,
    /// When it takes effect: at the first block end at or after.
    pub effect_ns: HouseNs,
    /// It is confirmed or replaced by then.
    pub review_ns: HouseNs,
    /// Without word by then, a follower says that it is on its own (and keeps the ratio).
    pub expiry_ns: HouseNs,
    /// Forecast: seconds from the effect until the 95 % band of the phase error first leaves the
    /// headroom; absent if it does not within [`crate::SLIP_HORIZON_S`].
    pub seconds_to_slip: Option<f64>,
    /// Why it was made.
    pub reason: Reason,
    /// True if it was made for the crossing's backup source.
    pub on_backup: bool,
    /// True if it is for the record only: the crossing was declared silent.
    pub silent: bool,
    /// What it rests on.
    pub evidence: Evidence,
}

/// What the resampler is to do.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub enum Realised {
    /// One ratio.
    Single(Fraction),
    /// Two neighbouring ratios in turn, changed at block ends, whose average is the wanted one.
    Cadence(Cadence),
    /// One table of phases; each output moves on by one number of phases or by one more.
    Stepping(Stepping),
    /// Two neighbouring ratios whose average is the wanted one, each held until the running error
    /// would leave ±`swing_samples`.
    Lazy {
        /// The two ratios.
        cadence: Cadence,
        /// Limit of the running error, output samples; at least the cadence's error bound.
        swing_samples: f64,
    },
}

/// Why a setting was made.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub enum Reason {
    /// The crossing was declared.
    First,
    /// The setting before it would not have kept the phase error in the tube.
    Evidence,
    /// The phase error is out of the tube, or too uncertain, and is brought back.
    Recovery,
    /// A declaration changed.
    Declaration,
    /// Another crossing of its group changed.
    Group,
    /// The stream comes from another source.
    ChangeOver,
    /// Nothing changed; the setting before it was due for review.
    Renewal,
}

/// The evidence of a decision, at its `decided_ns`.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Evidence {
    /// Target: true sink rate over true source rate.
    pub target: f64,
    /// Lower end of the target's 95 % interval.
    pub target_low: f64,
    /// Upper end of the target's 95 % interval.
    pub target_high: f64,
    /// Drift of the source, dimensionless.
    pub source_drift: f64,
    /// Standard deviation of the source's drift.
    pub source_deviation: f64,
    /// Drift of the sink, dimensionless.
    pub sink_drift: f64,
    /// Standard deviation of the sink's drift.
    pub sink_deviation: f64,
    /// Phase error, sink samples.
    pub phase_error_samples: f64,
    /// Standard deviation of the phase error, sink samples.
    pub phase_deviation_samples: f64,
    /// Smallest ratio that keeps the phase error in the tube over the expected hold.
    pub allowed_low: Fraction,
    /// Largest such ratio. Equal to `allowed_low` where there is no such interval.
    pub allowed_high: Fraction,
    /// How long the setting should hold, seconds.
    pub expected_hold_s: f64,
}

impl Setting {
    /// The long-run average ratio that the resampler really makes.
    pub fn average(&self) -> Fraction {
        match self.realised {
            Realised::Single(ratio) => ratio,
            Realised::Cadence(_) | Realised::Stepping(_) | Realised::Lazy { .. } => self.wanted,
        }
    }

    /// Checks the certificate against the bounds the verifier knows of.
    ///
    /// What it proves: [`Certificate::Simplest`], that the single ratio is the simplest in the
    /// allowed interval of the evidence; [`Certificate::Nearest`], that the single ratio is the
    /// nearest to `wanted` within the bounds; [`Certificate::NeighbourPair`], that nothing within
    /// the bounds lies between the two ratios of the cadence or the lazy switching, and `wanted`
    /// does; [`Certificate::SteppingPair`], that the two advances of a table of `max_l` phases
    /// enclose `wanted`.
    ///
    /// # Errors
    /// [`CertificateError`] names what does not hold; [`CertificateError::Uncertified`] if there
    /// is no proof (bounds on prime factors).
    pub fn verify(&self, bounds: &Bounds) -> Result<(), CertificateError> {
        let wanted = exact(&self.wanted);
        let region = bounds.into();
        match (self.realised, &self.certificate) {
            (Realised::Stepping(stepping), certificate) => {
                let Certificate::SteppingPair(pair) = self.certificate else {
                    return Err(CertificateError::WrongKind);
                };
                let table = Node {
                    l: stepping.phases(),
                    m: stepping.advances().0,
                };
                if table.l != bounds.max_l() {
                    return Err(CertificateError::OutsideRegion(table));
                }
                if (pair.phases, pair.advance) != (table.l, table.m) || stepping.wanted() != wanted
                {
                    return Err(CertificateError::OtherAnswer { claimed: table });
                }
                let target = &wanted;
                certificate.verify(&Claim::SteppingPair { pair, target })
            }
            (Realised::Cadence(cadence) | Realised::Lazy { cadence, .. }, certificate) => {
                let (low, high) = (cadence.low(), cadence.high());
                certificate.verify(&Claim::NeighbourPair {
                    low,
                    high,
                    target: &wanted,
                    region,
                })
            }
            (Realised::Single(fraction), certificate @ Certificate::Simplest(_)) => {
                let (low, high) = (&self.evidence.allowed_low, &self.evidence.allowed_high);
                let not_inside = CertificateError::NotInInterval((&fraction).into());
                let interval = Interval::closed(exact(low), exact(high)).map_err(|_| not_inside)?;
                if !bounds.allow(&fraction) {
                    return Err(CertificateError::OutsideRegion((&fraction).into()));
                }
                certificate.verify(&Claim::Simplest {
                    fraction,
                    interval: &interval,
                })
            }
            (Realised::Single(ratio), certificate) => {
                let side = Side::Either;
                certificate.verify(&Claim::Nearest {
                    ratio,
                    target: &wanted,
                    region,
                    side,
                })
            }
        }
    }
}
