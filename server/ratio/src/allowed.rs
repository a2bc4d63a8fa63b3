//! Which ratios are allowed, and the nearest of them with its proof: one door for every limit a
//! plan may be asked to keep.
//!
//! **Cost.** That of the search behind it, and of the ladder.
//!
//! **Corner cases.** Where M is fixed or a power of two there is nothing to prove beyond rounding;
//! where a part must be a multiple, the proof is that of the problem with the multiple divided out.

use num_integer::Integer as _;

use crate::plan::{Query, plan};
use crate::{
    Bounds, Cadence, Certificate, Exact, Fraction, Interval, Lazy, MAX_BOUND, Multiple,
    MultipleBest, MultipleError, Node, Region, RegionError, Rung, Stepping, best_for_m, best_in,
    best_multiple, best_power_of_two, ladder, ladder_in, residual, target_from_f64,
};

/// The ratios to choose from.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Allowed {
    /// L and M up to their bounds, perhaps without large prime factors.
    Bounded(Bounds),
    /// L·M up to a limit, from 1 to 2^63 − 1.
    Product {
        /// Largest L·M.
        max_product: u64,
    },
    /// `weight_l`·L + `weight_m`·M up to a limit.
    Cost {
        /// Weight of L, at least 1.
        weight_l: u64,
        /// Weight of M, at least 1.
        weight_m: u64,
        /// Largest weighted sum.
        max_cost: u64,
    },
    /// L or M a multiple, both up to their bounds.
    Multiple(Multiple, Bounds),
    /// One M; L from 1 to `max_l`.
    FixedM {
        /// The M.
        m: u64,
        /// Largest L.
        max_l: u64,
    },
    /// M a power of two, both up to their bounds.
    PowerOfTwoM(Bounds),
}

/// Why there is no such ratio.
#[derive(Clone, Copy, Debug, PartialEq, Eq, thiserror::Error)]
pub enum NotAllowed {
    /// The limit of a product or a weighted sum is out of range.
    #[error(transparent)]
    Region(#[from] RegionError),
    /// No multiple is within the bounds.
    #[error(transparent)]
    Multiple(#[from] MultipleError),
}

/// What was found.
#[derive(Clone, Debug)]
pub struct Answer {
    /// What was asked for, in lowest terms.
    pub target: Exact,
    /// The nearest ratio: in lowest terms, unless M is fixed or a part has to be a multiple.
    pub best: Fraction,
    /// (L/M)/target − 1 of it.
    pub residual: f64,
    /// Why it is the nearest.
    pub proof: Proof,
    /// Error against size, the simplest first.
    pub ladder: Vec<Rung>,
    /// Two allowed ratios that average the target exactly.
    pub cadence: Option<Cadence>,
}

/// Why the answer is the nearest.
#[derive(Clone, Copy, Debug)]
pub enum Proof {
    /// A certificate for the target and what is allowed.
    Direct(Certificate),
    /// A certificate for the problem that is left when the multiple is divided out.
    Reduced(MultipleBest),
    /// None is needed: see [`ROUNDED`].
    Rounded,
}

/// How [`Proof::Rounded`] is put in words.
pub const ROUNDED: &str = "L is the target times M, rounded to the nearest L allowed";

impl Allowed {
    /// The nearest of these ratios to `target`, and what goes with it.
    ///
    /// # Errors
    /// [`NotAllowed`] if no ratio is allowed at all.
    ///
    /// # Examples
    /// ```
    /// use ratewright_ratio::{Exact, Fraction, allowed::Allowed};
    /// let small = Allowed::Product { max_product: 1_000 };
    /// assert_eq!(small.answer(&Exact::new(160, 147))?.best, Fraction::new(25, 23));
    /// # Ok::<(), ratewright_ratio::allowed::NotAllowed>(())
    /// ```
    pub fn answer(&self, target: &Exact) -> Result<Answer, NotAllowed> {
        let target = target.reduced();
        match *self {
            Self::Bounded(bounds) => Ok(bounded(target, bounds)),
            Self::Product { max_product } => Ok(within(target, &Region::product(max_product)?)),
            Self::Cost {
                weight_l,
                weight_m,
                max_cost,
            } => {
                let region = Region::weighted(weight_l, weight_m, max_cost)?;
                Ok(within(target, &region))
            }
            Self::Multiple(multiple, bounds) => Ok(multiples(target, multiple, &bounds)?),
            Self::FixedM { m, max_l } => Ok(fixed(target, m, max_l)),
            Self::PowerOfTwoM(bounds) => Ok(powers_of_two(target, &bounds)),
        }
    }
}

impl Allowed {
    /// The largest L of one table, where that is limited by itself.
    pub fn max_l(&self) -> Option<u64> {
        let max_l = match *self {
            Self::Product { .. } | Self::Cost { .. } => return None,
            Self::Bounded(bounds) | Self::Multiple(_, bounds) | Self::PowerOfTwoM(bounds) => {
                bounds.max_l()
            }
            Self::FixedM { max_l, .. } => max_l,
        };
        (max_l < MAX_BOUND).then_some(max_l)
    }

    /// True if a ratio is one of these, in lowest terms or, where a part has to be a multiple or M is fixed, as
    /// the smallest multiple of both parts that is.
    ///
    /// # Examples
    /// ```
    /// use ratewright_ratio::{Bounds, Fraction, Multiple, allowed::Allowed};
    /// let bounds = Bounds::new(512, 640)?;
    /// assert!(!Allowed::Bounded(bounds).allows(&Fraction::new(603, 554)));
    /// assert!(Allowed::Multiple(Multiple::OfL(4), bounds).allows(&Fraction::new(3, 2)));
    /// assert!(!Allowed::FixedM { m: 1000, max_l: 2000 }.allows(&Fraction::new(4, 3)));
    /// # Ok::<(), ratewright_ratio::BoundsError>(())
    /// ```
    pub fn allows(&self, ratio: &Fraction) -> bool {
        let (l, m) = (*ratio.numer(), *ratio.denom());
        let times = |k: u64| Some(Fraction::new_raw(l.checked_mul(k)?, m.checked_mul(k)?));
        let within = |bounds: &Bounds, k: u64| times(k).is_some_and(|ratio| bounds.allow(&ratio));
        match *self {
            Self::Bounded(bounds) => bounds.allow(ratio),
            Self::Product { max_product } => {
                Region::product(max_product).is_ok_and(|region| region.contains(l, m))
            }
            Self::Cost {
                weight_l,
                weight_m,
                max_cost,
            } => Region::weighted(weight_l, weight_m, max_cost)
                .is_ok_and(|region| region.contains(l, m)),
            Self::Multiple(Multiple::OfL(k), bounds) => within(&bounds, k / k.gcd(&l)),
            Self::Multiple(Multiple::OfM(k), bounds) => within(&bounds, k / k.gcd(&m)),
            Self::FixedM { m: fixed, max_l } => {
                fixed.is_multiple_of(m) && l.checked_mul(fixed / m).is_some_and(|l| l <= max_l)
            }
            Self::PowerOfTwoM(bounds) => m.is_power_of_two() && bounds.allow(ratio),
        }
    }
}

impl Answer {
    /// The nearest allowed ratio that makes at most what is wanted. `None` if there is none, or if it is not the
    /// best one and the pair has too long a period to make a cadence.
    ///
    /// # Examples
    /// ```
    /// use ratewright_ratio::{Bounds, Exact, Fraction, allowed::Allowed};
    /// let answer = Allowed::Bounded(Bounds::new(64, 64)?).answer(&Exact::new(10_001, 10_000))?;
    /// assert_eq!((answer.below(), answer.above()), (Some(Fraction::new(1, 1)), Some(Fraction::new(64, 63))));
    /// let exact = Allowed::Bounded(Bounds::new(64, 64)?).answer(&Exact::new(2, 3))?;
    /// assert_eq!((exact.below(), exact.above()), (Some(exact.best), Some(exact.best)));
    /// # Ok::<(), Box<dyn std::error::Error>>(())
    /// ```
    pub fn below(&self) -> Option<Fraction> {
        let low = self.cadence.as_ref().map(Cadence::low);
        if self.residual <= 0.0 {
            Some(self.best)
        } else {
            low
        }
    }

    /// The nearest allowed ratio that makes at least what is wanted; `None` as in [`Answer::below`].
    pub fn above(&self) -> Option<Fraction> {
        let high = self.cadence.as_ref().map(Cadence::high);
        if self.residual >= 0.0 {
            Some(self.best)
        } else {
            high
        }
    }

    /// The cadence with as few changes as a swing allows that takes `share` of the headroom, or as much as the
    /// balanced order needs. `None` if there is no cadence, or if no order of its blocks stays within the headroom.
    pub fn lazy(&self, headroom_samples: f64, share: f64) -> Option<Lazy> {
        let cadence = self.cadence?;
        let headroom = target_from_f64(headroom_samples).ok()?;
        let swing = target_from_f64(share * headroom_samples).ok()?;
        Lazy::new(cadence, &swing.max(cadence.error_bound()).min(headroom)).ok()
    }

    /// The largest |residual| that what is run may have, if it is on average the target and the true target is
    /// anywhere in an interval.
    pub fn residual_at_worst(&self, interval: &Interval) -> f64 {
        let value = |exact: &Exact| *exact.numer() as f64 / *exact.denom() as f64;
        let at = |end: &Exact| (value(&self.target) / value(end) - 1.0).abs();
        at(interval.lo()).max(at(interval.hi()))
    }

    /// Stepping beside a cadence of two filters, with as many phases as the two have together, but
    /// no more than one table may have, if that is off by less. None where M is the modulus of an
    /// accumulator: the cadence is that of its two steps already.
    pub fn stepping_of_equal_size(&self, allowed: &Allowed) -> Option<Stepping> {
        if matches!(self.proof, Proof::Rounded) {
            return None;
        }
        let cadence = self.cadence.as_ref()?;
        let phases = cadence.low().numer().checked_add(*cadence.high().numer())?;
        let phases = allowed.max_l().map_or(phases, |max_l| phases.min(max_l));
        let stepping = Stepping::new(&self.target, phases).ok()?;
        (stepping.error_bound() < cadence.error_bound()).then_some(stepping)
    }
}

fn bounded(target: Exact, bounds: Bounds) -> Answer {
    let plan = plan(&Query {
        target,
        bounds,
        headroom_samples: 1.0,
        sink_rate_hz: None,
    });
    Answer {
        target,
        best: plan.best.ratio,
        residual: plan.best.residual,
        proof: Proof::Direct(plan.best.certificate),
        ladder: plan.ladder,
        cadence: plan.cadence,
    }
}

fn within(target: Exact, region: &Region) -> Answer {
    let best = best_in(&target, region);
    Answer {
        target,
        best: best.ratio,
        residual: residual(&best.ratio, &target),
        proof: Proof::Direct(best.certificate),
        ladder: ladder_in(&target, region),
        cadence: enclosing(&target, &best.certificate, |end| end),
    }
}

fn multiples(target: Exact, multiple: Multiple, bounds: &Bounds) -> Result<Answer, MultipleError> {
    let found = best_multiple(&target, multiple, bounds)?;
    // Dividing by the multiple scales ratio and target alike, so residuals stay as they are.
    let ladder = ladder(&found.target, &found.bounds)
        .into_iter()
        .map(|rung| Rung {
            first: unreduced(multiplied(multiple, Node::from(&rung.first))),
            step: multiplied(multiple, rung.step),
            ..rung
        });
    let best = Fraction::new_raw(found.l, found.m);
    Ok(Answer {
        target,
        best,
        residual: residual(&best, &target),
        proof: Proof::Reduced(found),
        ladder: ladder.collect(),
        cadence: enclosing(&target, &found.reduced.certificate, |end| {
            multiplied(multiple, end)
        }),
    })
}

fn fixed(target: Exact, m: u64, max_l: u64) -> Answer {
    let best = Fraction::new_raw(best_for_m(&target, m, max_l), m);
    Answer {
        cadence: on_grid(&target, m, max_l),
        ..rounded(target, best, vec![rung(&target, best)])
    }
}

fn powers_of_two(target: Exact, bounds: &Bounds) -> Answer {
    let max_l = bounds.max_l();
    let finest = bounds.max_m().ilog2();
    let up_to = |bit: u32| {
        let bounds = Bounds::new(max_l, 1 << bit).expect("2^bit is within the bound of M");
        best_power_of_two(&target, &bounds)
    };
    let mut steps: Vec<Fraction> = (0..=finest).map(up_to).collect();
    steps.dedup();
    let best = best_power_of_two(&target, bounds);
    let ladder = steps.into_iter().map(|ratio| rung(&target, ratio));
    let answer = rounded(target, best, ladder.collect());
    let is_exact = answer.residual == 0.0;
    // The finest grid of which both ratios are within the bounds.
    let cadence = || {
        (0..=finest)
            .rev()
            .find_map(|bit| on_grid(&target, 1 << bit, max_l))
    };
    Answer {
        cadence: if is_exact { None } else { cadence() },
        ..answer
    }
}

fn rounded(target: Exact, best: Fraction, ladder: Vec<Rung>) -> Answer {
    Answer {
        target,
        best,
        residual: residual(&best, &target),
        proof: Proof::Rounded,
        ladder,
        cadence: None,
    }
}

/// The cadence of the ends of a certificate's bracket, each changed by `end`.
fn enclosing(
    target: &Exact,
    certificate: &Certificate,
    end: impl Fn(Node) -> Node,
) -> Option<Cadence> {
    let Certificate::Nearest(bracket) = certificate else {
        return None;
    };
    bracket.below.fraction().zip(bracket.above.fraction())?;
    let (low, high) = (end(bracket.below), end(bracket.above));
    Cadence::of_pair(target, unreduced(low), unreduced(high)).ok()
}

/// The cadence of the two ratios of this M around the target.
fn on_grid(target: &Exact, m: u64, max_l: u64) -> Option<Cadence> {
    let nearest = best_for_m(target, m, max_l);
    let is_below = residual(&Fraction::new_raw(nearest, m), target) < 0.0;
    let low = if is_below { nearest } else { nearest - 1 };
    let pair = (Fraction::new_raw(low, m), Fraction::new_raw(low + 1, m));
    let cadence = Cadence::of_pair(target, pair.0, pair.1).ok();
    cadence.filter(|_| low < max_l)
}

/// The pair of which the certificate's problem has had the multiple divided out.
pub fn multiplied(multiple: Multiple, node: Node) -> Node {
    match multiple {
        Multiple::OfL(k) => Node {
            l: k * node.l,
            m: node.m,
        },
        Multiple::OfM(k) => Node {
            l: node.l,
            m: k * node.m,
        },
    }
}

/// A block takes its L and M as they are, so common factors stay.
fn unreduced(node: Node) -> Fraction {
    Fraction::new_raw(node.l, node.m)
}

fn rung(target: &Exact, ratio: Fraction) -> Rung {
    let residual = residual(&ratio, target);
    Rung {
        first: ratio,
        step: Node { l: 0, m: 0 },
        count: 1,
        first_residual: residual,
        last_residual: residual,
    }
}
