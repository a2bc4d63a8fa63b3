//! The second layer: a wanted fraction within the bounds of a resampler.

use ratewright_ratio::{
    Bounds, Cadence, Certificate, Exact, Fraction, Interval, MAX_BOUND, best, exact, simplest,
    target_from_f64,
};

use crate::policy::{CARRIED_SAMPLES, MAX_VIRTUAL};
use crate::{Realisation, Realised};

/// A wanted fraction with what realises it, and the proof.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(crate) struct Way {
    pub(crate) wanted: Fraction,
    pub(crate) realised: Realised,
    pub(crate) certificate: Certificate,
}

/// An interval of ratios with ends that fit 64 bits, rounded inward, and its simplest fraction.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(crate) struct Allowed {
    pub(crate) low: Fraction,
    pub(crate) high: Fraction,
    pub(crate) simplest: Fraction,
    pub(crate) certificate: Certificate,
}

/// Bounds of the virtual rates.
fn virtual_bounds() -> Bounds {
    Bounds::new(MAX_BOUND, MAX_VIRTUAL).expect("both are in range")
}

/// The nearest virtual rate to a ratio.
pub(crate) fn nearest_virtual(ratio: f64) -> Fraction {
    let target = target_from_f64(ratio).expect("ratios are within 2^-21 to 2^21");
    best(&target, &virtual_bounds()).ratio
}

/// The ratios from `low` to `high`; `None` if that is empty, or all of it is finer than a virtual
/// rate can be.
pub(crate) fn allowed(low: f64, high: f64) -> Option<Allowed> {
    let (low, high) = (inward(low, true)?, inward(high, false)?);
    let interval = Interval::closed(exact(&low), exact(&high)).ok()?;
    let found = simplest(&interval)?;
    (*found.fraction.denom() <= MAX_VIRTUAL).then_some(Allowed {
        low,
        high,
        simplest: found.fraction,
        certificate: found.certificate,
    })
}

/// A double as a fraction of 64-bit parts: itself if it fits, else the next multiple of 2⁻⁶⁰.
fn inward(ratio: f64, up: bool) -> Option<Fraction> {
    let target = target_from_f64(ratio).ok()?;
    let parts = (
        u64::try_from(*target.numer()),
        u64::try_from(*target.denom()),
    );
    if let (Ok(numer), Ok(denom)) = parts {
        return Some(Fraction::new_raw(numer, denom));
    }
    // The double has at most 53 bits, so a denominator beyond 2^63 means that it is below 2^-10.
    let shift = target.denom().trailing_zeros().checked_sub(60)?;
    let floor = target.numer() >> shift;
    let numer = u64::try_from(floor + u128::from(up)).ok()?;
    Some(Fraction::new(numer, 1 << 60))
}

impl Allowed {
    /// The simplest fraction itself, if the bounds allow it.
    pub(crate) fn single(&self, bounds: &Bounds) -> Option<Way> {
        bounds.allow(&self.simplest).then_some(Way {
            wanted: self.simplest,
            realised: Realised::Single(self.simplest),
            certificate: self.certificate,
        })
    }

    /// Any fraction of the interval that the bounds allow. Without bounds on prime factors that is
    /// the simplest or none, as the simplest has the smallest parts of all.
    pub(crate) fn any_single(&self, bounds: &Bounds) -> Option<Way> {
        if let Some(way) = self.single(bounds) {
            return Some(way);
        }
        bounds.largest_prime()?;
        let within = |ratio: &Fraction| *ratio >= self.low && *ratio <= self.high;
        let nearest = best(&exact(&self.simplest), bounds);
        within(&nearest.ratio).then_some(Way {
            wanted: nearest.ratio,
            realised: Realised::Single(nearest.ratio),
            certificate: nearest.certificate,
        })
    }
}

/// A wanted fraction as the resampler can best make it: by itself, by a cadence, or by the
/// nearest single ratio.
pub(crate) fn realise(wanted: Fraction, bounds: &Bounds, realisation: Realisation) -> Way {
    let target = exact(&wanted);
    if realisation == Realisation::Cadence
        && !bounds.allow(&wanted)
        && let Ok(cadence) = Cadence::new(&target, bounds)
    {
        let certificate = cadence.certificate(bounds);
        return Way {
            wanted,
            realised: Realised::Cadence(cadence),
            certificate,
        };
    }
    let nearest = best(&target, bounds);
    Way {
        wanted,
        realised: Realised::Single(nearest.ratio),
        certificate: nearest.certificate,
    }
}

/// How far a cadence around the target may err, in output samples: for the ratios a/b < c/d with
/// bc − ad = δ that is δ/(2·min(b, d)) whatever lies between, and what a change of pair carries
/// over. 0 if the target needs none; `None` if no two ratios enclose it.
pub(crate) fn cadence_error(target: &Exact, bounds: &Bounds) -> Option<f64> {
    match Cadence::new(target, bounds) {
        Ok(cadence) => Some(pair_error(&cadence)),
        Err(ratewright_ratio::CadenceError::SingleRatio { .. }) => Some(0.0),
        Err(_) => None,
    }
}

/// The same for a given cadence.
pub(crate) fn pair_error(cadence: &Cadence) -> f64 {
    let (low, high) = (cadence.low(), cadence.high());
    let (a, b) = (u128::from(*low.numer()), u128::from(*low.denom()));
    let (c, d) = (u128::from(*high.numer()), u128::from(*high.denom()));
    // Both products are below 2^126: bounds are below 2^63.
    let determinant = (b * c - a * d) as f64;
    determinant / (2.0 * b.min(d) as f64) + CARRIED_SAMPLES
}

/// The error of what is in force.
pub(crate) fn error_of(realised: &Realised) -> f64 {
    match realised {
        Realised::Single(_) => 0.0,
        Realised::Cadence(cadence) => pair_error(cadence),
        Realised::Stepping(stepping) => {
            let bound = stepping.error_bound();
            *bound.numer() as f64 / *bound.denom() as f64 + CARRIED_SAMPLES
        }
        Realised::Lazy { swing_samples, .. } => *swing_samples,
    }
}

/// Input samples of the longest block of what is in force: it may change at block ends only.
pub(crate) fn block_inputs(realised: &Realised) -> u64 {
    match realised {
        Realised::Single(ratio) => *ratio.denom(),
        Realised::Stepping(_) => 1,
        Realised::Cadence(cadence) | Realised::Lazy { cadence, .. } => {
            *cadence.low().denom().max(cadence.high().denom())
        }
    }
}
