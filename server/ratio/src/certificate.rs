//! Certificates: what proves an answer, checkable with a few multiplications by whoever receives it.
//!
//! A [`Certificate`] is the witness. A [`Claim`] is the statement it is to prove, put together by the
//! checker from what it knows itself (its own bounds, the target it was told). Nothing of the statement is
//! read from the certificate, so a certificate for other bounds proves nothing.
//!
//! The theorems are those of [`crate::bracket`], [`crate::nearest`] and [`mod@crate::simplest`].
//! Cost: 4 to 8 multiplications; no division, no allocation.

use std::hint::select_unpredictable;

use serde::{Deserialize, Serialize};
use thiserror::Error;

use crate::bracket::{Bracket, Node};
use crate::nearest::nearer;
use crate::simplest::Parents;
use crate::wide::Wide;
use crate::{Exact, Fraction, Interval, Region};

/// What proves an answer.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Certificate {
    /// Nothing allowed lies strictly between the ends of this bracket, and the answer is the right end.
    Nearest(Bracket),
    /// The answer is the sum of these parents, and neither is in the interval.
    Simplest(Parents),
    /// The two ratios are neighbours: nothing allowed lies between them.
    NeighbourPair(Bracket),
    /// The two advances enclose the wanted one.
    SteppingPair(SteppingPair),
    /// The answer is right by construction but has no short proof.
    Uncertified(Reason),
}

/// A filter of `phases` phases that moves on by `advance` or `advance + 1` of them for every output.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct SteppingPair {
    /// Phases of the filter table: L.
    pub phases: u64,
    /// The smaller advance, phases for one output, at least 1.
    pub advance: u64,
}

/// Why an answer has no certificate.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize, Error)]
#[serde(rename_all = "snake_case")]
#[non_exhaustive]
pub enum Reason {
    /// Bounds on prime factors are not down-closed, so the bracket theorem does not hold.
    #[error("bounds on prime factors have no short proof")]
    SmoothBounds,
    /// The set of answers was given by a predicate.
    #[error("an arbitrary predicate has no short proof")]
    Predicate,
}

/// From which side of the target answers are wanted.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Side {
    /// The nearest on either side.
    #[default]
    Either,
    /// The largest ratio that is at most the target.
    Below,
    /// The smallest ratio that is at least the target.
    Above,
}

/// The statement a certificate is to prove.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Claim<'a> {
    /// `ratio` is the nearest to `target` of all in `region`, from `side`, ties to smaller M then smaller L.
    Nearest {
        /// The answer.
        ratio: Fraction,
        /// What was asked for.
        target: &'a Exact,
        /// What was allowed.
        region: Region,
        /// From which side.
        side: Side,
    },
    /// `fraction` is the simplest in `interval`.
    Simplest {
        /// The answer.
        fraction: Fraction,
        /// What was asked for.
        interval: &'a Interval,
    },
    /// `low ≤ target ≤ high`, both in `region`, with nothing of `region` between them.
    NeighbourPair {
        /// The lower ratio.
        low: Fraction,
        /// The upper ratio.
        high: Fraction,
        /// What lies between.
        target: &'a Exact,
        /// What was allowed.
        region: Region,
    },
    /// With `phases` phases, advances of `advance` and `advance + 1` enclose `target`:
    /// `phases/(advance + 1) ≤ target ≤ phases/advance`.
    SteppingPair {
        /// The pair.
        pair: SteppingPair,
        /// What lies between.
        target: &'a Exact,
    },
}

/// Why a certificate does not prove a claim.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Error)]
pub enum CertificateError {
    /// A certificate of another kind than the claim.
    #[error("the certificate is of another kind than the claim")]
    WrongKind,
    /// There is nothing to check.
    #[error("uncertified: {0}")]
    Uncertified(Reason),
    /// The two ends are not neighbours (determinant other than 1).
    #[error("{low} and {high} are not neighbours: their determinant is not 1")]
    NotNeighbours {
        /// The lower end.
        low: Node,
        /// The upper end.
        high: Node,
    },
    /// An end breaks the bounds.
    #[error("{0} is outside the bounds")]
    OutsideRegion(Node),
    /// The mediant is allowed, so something lies between the ends.
    #[error("the mediant {0} is within the bounds, so the ends are not the nearest")]
    MediantInside(Node),
    /// The target is not between the ends.
    #[error("the target is not between {low} and {high}")]
    TargetOutside {
        /// The lower end.
        low: Node,
        /// The upper end.
        high: Node,
    },
    /// The claimed answer is not the one the bracket proves.
    #[error("the claimed answer {claimed} is not what the certificate proves")]
    OtherAnswer {
        /// The claimed answer.
        claimed: Node,
    },
    /// A claimed simplest fraction that is not in the interval.
    #[error("{0} is not in the interval")]
    NotInInterval(Node),
    /// A parent in the interval is simpler than the claimed answer.
    #[error("the parent {0} is in the interval and simpler")]
    ParentInside(Node),
}

impl Certificate {
    /// Checks that this certificate proves `claim`.
    ///
    /// # Errors
    /// [`CertificateError`] names the first thing that does not hold.
    ///
    /// # Examples
    /// ```
    /// use ratewright_ratio::{Bounds, Claim, Exact, Fraction, Side, best};
    /// let (target, bounds) = (Exact::new(10_000, 10_001), Bounds::new(64, 64)?);
    /// let best = best(&target, &bounds);
    /// let claim = |ratio| Claim::Nearest { ratio, target: &target, region: (&bounds).into(), side: Side::Either };
    /// assert!(best.certificate.verify(&claim(best.ratio)).is_ok());
    /// assert!(best.certificate.verify(&claim(Fraction::new(63, 64))).is_err());
    /// # Ok::<(), ratewright_ratio::BoundsError>(())
    /// ```
    pub fn verify(&self, claim: &Claim<'_>) -> Result<(), CertificateError> {
        if let (
            Self::Nearest(bracket),
            Claim::Nearest {
                ratio,
                target,
                region,
                side: Side::Either,
            },
        ) = (self, claim)
            && narrow_nearest(bracket, ratio, target, region)
        {
            return Ok(());
        }
        self.verify_in_full(claim)
    }

    #[inline(never)]
    fn verify_in_full(&self, claim: &Claim<'_>) -> Result<(), CertificateError> {
        match (self, claim) {
            (
                Self::Nearest(bracket),
                Claim::Nearest {
                    ratio,
                    target,
                    region,
                    side,
                },
            ) => verify_nearest(bracket, ratio, target, region, *side),
            (Self::Simplest(parents), Claim::Simplest { fraction, interval }) => {
                verify_simplest(parents, fraction, interval)
            }
            (
                Self::NeighbourPair(bracket),
                Claim::NeighbourPair {
                    low,
                    high,
                    target,
                    region,
                },
            ) => {
                agree(low, bracket.below)?;
                agree(high, bracket.above)?;
                verify_bracket(bracket, target, region)
            }
            (Self::SteppingPair(shown), Claim::SteppingPair { pair, target }) => {
                verify_stepping(*shown, *pair, target)
            }
            (Self::Uncertified(reason), _) => Err(CertificateError::Uncertified(*reason)),
            _ => Err(CertificateError::WrongKind),
        }
    }
}

fn agree(claimed: &Fraction, shown: Node) -> Result<(), CertificateError> {
    let claimed = Node::from(claimed);
    if claimed == shown {
        Ok(())
    } else {
        Err(CertificateError::OtherAnswer { claimed })
    }
}

/// Determinant of two nodes is 1: `low < high` and nothing with smaller parts between.
#[inline]
fn verify_neighbours(low: Node, high: Node) -> Result<(), CertificateError> {
    let up = u128::from(high.l) * u128::from(low.m);
    let down = u128::from(low.l) * u128::from(high.m);
    if up.checked_sub(down) == Some(1) {
        Ok(())
    } else {
        Err(CertificateError::NotNeighbours { low, high })
    }
}

/// Every hypothesis of the bracket theorem.
#[inline]
fn verify_bracket(
    bracket: &Bracket,
    target: &Exact,
    region: &Region,
) -> Result<(), CertificateError> {
    let (low, high) = (bracket.below, bracket.above);
    verify_neighbours(low, high)?;
    for end in [low, high] {
        let sentinel = end == Node::ZERO || end == Node::INFINITY;
        if !sentinel && !region.contains(end.l, end.m) {
            return Err(CertificateError::OutsideRegion(end));
        }
    }
    // A mediant beyond 64 bits is beyond every region.
    if let (Some(l), Some(m)) = (low.l.checked_add(high.l), low.m.checked_add(high.m))
        && region.contains(l, m)
    {
        return Err(CertificateError::MediantInside(Node { l, m }));
    }
    if low.compare_target(target).is_lt() || high.compare_target(target).is_gt() {
        return Err(CertificateError::TargetOutside { low, high });
    }
    Ok(())
}

/// The common case in one machine word a product: parts below 2^31, a target n/D of 64 bits, both ends finite,
/// no tie. False decides nothing.
///
/// With the determinant 1 the distances e = n·b − a·D and f = c·D − n·d have e·d + f·b = D. So the target is
/// between the ends iff 0 ≤ e·d ≤ D, and the lower end is the nearer one iff e·d < D − e·d.
#[inline]
fn narrow_nearest(bracket: &Bracket, ratio: &Fraction, target: &Exact, region: &Region) -> bool {
    let (Node { l: a, m: b }, Node { l: c, m: d }) = (bracket.below, bracket.above);
    let (Ok(n), Ok(whole)) = (
        u64::try_from(*target.numer()),
        u64::try_from(*target.denom()),
    ) else {
        return false;
    };
    if (a | b | c | d) >= 1 << 31 || b * c != a * d + 1 || a == 0 || d == 0 {
        return false;
    }
    let product = |x: u64, y: u64| u128::from(x) * u128::from(y);
    let Ok(from_below) = u64::try_from(product(n, b).wrapping_sub(product(whole, a))) else {
        return false;
    };
    let Some(high) = from_below
        .checked_mul(d)
        .and_then(|low| whole.checked_sub(low))
    else {
        return false;
    };
    let low = whole - high;
    // No branch: which end is nearer is as good as random.
    let l = select_unpredictable(low < high, a, c);
    let m = select_unpredictable(low < high, b, d);
    region.separates((a, b), (c, d)) & (low != high) & (*ratio.numer() == l) & (*ratio.denom() == m)
}

fn verify_nearest(
    bracket: &Bracket,
    ratio: &Fraction,
    target: &Exact,
    region: &Region,
    side: Side,
) -> Result<(), CertificateError> {
    verify_bracket(bracket, target, region)?;
    let exactly_at = |end: Node| end.compare_target(target).is_eq();
    let proved = match side {
        Side::Either => return agree(ratio, Node::from(&nearer(bracket, target))),
        Side::Below if exactly_at(bracket.above) => bracket.above,
        Side::Below => bracket.below,
        Side::Above if exactly_at(bracket.below) => bracket.below,
        Side::Above => bracket.above,
    };
    if proved.fraction().is_none() {
        return Err(CertificateError::OtherAnswer {
            claimed: Node::from(ratio),
        });
    }
    agree(ratio, proved)
}

fn verify_simplest(
    parents: &Parents,
    fraction: &Fraction,
    interval: &Interval,
) -> Result<(), CertificateError> {
    let claimed = Node::from(fraction);
    let (left, right) = (parents.left, parents.right);
    verify_neighbours(left, right)?;
    let sum = (left.l.checked_add(right.l), left.m.checked_add(right.m));
    if sum != (Some(claimed.l), Some(claimed.m)) {
        return Err(CertificateError::OtherAnswer { claimed });
    }
    if !interval.contains(fraction) {
        return Err(CertificateError::NotInInterval(claimed));
    }
    match [left, right]
        .into_iter()
        .find(|parent| interval.holds(parent.l, parent.m))
    {
        Some(parent) => Err(CertificateError::ParentInside(parent)),
        None => Ok(()),
    }
}

fn verify_stepping(
    shown: SteppingPair,
    claimed: SteppingPair,
    target: &Exact,
) -> Result<(), CertificateError> {
    let low = Node {
        l: claimed.phases,
        m: claimed.advance.saturating_add(1),
    };
    let high = Node {
        l: claimed.phases,
        m: claimed.advance,
    };
    if shown != claimed || claimed.phases == 0 || claimed.advance == 0 {
        return Err(CertificateError::OtherAnswer { claimed: high });
    }
    let (n, d) = (*target.numer(), *target.denom());
    let wanted = Wide::product(d, claimed.phases);
    if Wide::product(n, high.m) > wanted || Wide::product(n, low.m) < wanted {
        return Err(CertificateError::TargetOutside { low, high });
    }
    Ok(())
}
