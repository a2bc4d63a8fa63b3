//! Checking a setting before anyone runs it.
//!
//! Two things are checked, by a handful of multiplications: that what is to be run stays within
//! the bounds of the crossing's filter bank and averages the wanted ratio, or comes as near to it
//! as one ratio can, and that the certificate proves what it says. The theorems are in
//! [`ratewright_ratio`].

use ratewright_ratio::{
    Bounds, Bracket, Cadence, Certificate, CertificateError, Claim, Fraction, Node, Side, Stepping,
    SteppingPair, exact,
};
use thiserror::Error;

use crate::{Proof, Realised, Setting};

/// Why a setting is not to be run.
#[derive(Clone, Debug, PartialEq, Error)]
pub enum VerifyError {
    /// What is to be run is more than the filter bank holds.
    #[error("{ratio} is outside the crossing's bounds of {max_l}/{max_m}")]
    OutsideBounds {
        /// The ratio.
        ratio: Fraction,
        /// Largest L.
        max_l: u64,
        /// Largest M.
        max_m: u64,
    },
    /// More phases than the table holds.
    #[error("{phases} phases are more than the crossing's {max_l}")]
    TooManyPhases {
        /// The phases of the setting.
        phases: u64,
        /// Largest L, which is the table's size.
        max_l: u64,
    },
    /// One ratio that is not the wanted one, without the proof that it is the nearest.
    #[error("it runs {run}, but {wanted} is wanted")]
    NotWanted {
        /// What would be run.
        run: Fraction,
        /// What is wanted.
        wanted: Fraction,
    },
    /// The certificate does not prove the choice.
    #[error("its certificate fails: {0}")]
    Certificate(#[from] CertificateError),
    /// The bounds to check it against are gone.
    #[error("its crossing is no longer declared, so there are no bounds to check it against")]
    NoBounds,
    /// It could not even be read.
    #[error("{0}")]
    Malformed(#[from] crate::WireError),
}

impl Setting {
    /// Checks what is to be run and its certificate, within the bounds of the crossing. A setting
    /// that says it is uncertified passes if what is to be run is sound.
    ///
    /// # Errors
    /// [`VerifyError`] says what does not hold.
    pub fn verify(&self, bounds: &Bounds) -> Result<(), VerifyError> {
        match &self.realised {
            Realised::Single(ratio) => {
                within(ratio, bounds)?;
                self.verify_single(*ratio, bounds)
            }
            Realised::Cadence(cadence) | Realised::Lazy { cadence, .. } => {
                verify_pair(cadence, bounds)?;
                self.verify_shown_pair(cadence)
            }
            Realised::Stepping(stepping) => self.verify_stepping(stepping, bounds),
        }
    }

    fn verify_single(&self, run: Fraction, bounds: &Bounds) -> Result<(), VerifyError> {
        match &self.proof {
            Proof::Nearest(bracket) => {
                let claim = Claim::Nearest {
                    ratio: run,
                    target: &exact(&self.wanted),
                    region: bounds.into(),
                    side: Side::Either,
                };
                return Ok(Certificate::Nearest(*bracket).verify(&claim)?);
            }
            Proof::Simplest { interval, parents } => {
                let fraction = self.wanted;
                let claim = Claim::Simplest { fraction, interval };
                Certificate::Simplest(*parents).verify(&claim)?;
            }
            Proof::Neighbours(_) | Proof::Stepping(_) => {
                return Err(CertificateError::WrongKind.into());
            }
            Proof::Uncertified(_) => {}
        }
        let wanted = self.wanted;
        if run == wanted {
            Ok(())
        } else {
            Err(VerifyError::NotWanted { run, wanted })
        }
    }

    /// That the cadence's own ratios are neighbours was checked already; here, that the
    /// certificate speaks of them.
    fn verify_shown_pair(&self, cadence: &Cadence) -> Result<(), VerifyError> {
        match &self.proof {
            Proof::Neighbours(bracket) if *bracket == ends(cadence) => Ok(()),
            Proof::Neighbours(_) => {
                let claimed = Node::from(&cadence.low());
                Err(CertificateError::OtherAnswer { claimed }.into())
            }
            Proof::Nearest(_) | Proof::Simplest { .. } | Proof::Stepping(_) => {
                Err(CertificateError::WrongKind.into())
            }
            Proof::Uncertified(_) => Ok(()),
        }
    }

    /// That the table is large enough, and that the two advances enclose the wanted ratio.
    fn verify_stepping(&self, stepping: &Stepping, bounds: &Bounds) -> Result<(), VerifyError> {
        let (phases, max_l) = (stepping.phases(), bounds.max_l());
        if phases > max_l {
            return Err(VerifyError::TooManyPhases { phases, max_l });
        }
        let advance = stepping.advances().0;
        let claim = Claim::SteppingPair {
            pair: SteppingPair { phases, advance },
            target: &exact(&self.wanted),
        };
        match &self.proof {
            Proof::Stepping(shown) => Ok(Certificate::SteppingPair(*shown).verify(&claim)?),
            Proof::Uncertified(_) => Ok(stepping.certificate().verify(&claim)?),
            _ => Err(CertificateError::WrongKind.into()),
        }
    }
}

fn within(ratio: &Fraction, bounds: &Bounds) -> Result<(), VerifyError> {
    if bounds.allow(ratio) {
        return Ok(());
    }
    let (max_l, max_m) = (bounds.max_l(), bounds.max_m());
    Err(VerifyError::OutsideBounds {
        ratio: *ratio,
        max_l,
        max_m,
    })
}

fn ends(cadence: &Cadence) -> Bracket {
    Bracket {
        below: Node::from(&cadence.low()),
        above: Node::from(&cadence.high()),
    }
}

/// Both ratios are in the bank, and nothing of the bank lies between them.
fn verify_pair(cadence: &Cadence, bounds: &Bounds) -> Result<(), VerifyError> {
    let (low, high) = (cadence.low(), cadence.high());
    within(&low, bounds)?;
    within(&high, bounds)?;
    let claim = Claim::NeighbourPair {
        low,
        high,
        target: cadence.wanted(),
        region: bounds.into(),
    };
    Ok(Certificate::NeighbourPair(ends(cadence)).verify(&claim)?)
}
