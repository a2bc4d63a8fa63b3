//! The second layer: a wanted fraction within the bounds of a resampler.

use ratewright_ratio::{
    Bounds, Cadence, Certificate, Exact, Fraction, Interval, MAX_BOUND, Stepping, best, exact,
    simplest, target_from_f64,
};

use crate::policy::{CARRIED_SAMPLES, MAX_VIRTUAL, SWING_SHARE};
use crate::timeline::as_double;
use crate::{CrossingDeclaration, Realisation, Realised};

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
    /// The smallest bounds that have a ratio of the interval: the simplest fraction has the
    /// smallest parts of all.
    pub(crate) fn bounds(&self) -> Option<Bounds> {
        Bounds::new(*self.simplest.numer(), *self.simplest.denom()).ok()
    }

    /// A fraction from the middle of it that no bounds of a resampler allow.
    pub(crate) fn finer(&self) -> Fraction {
        nearest_virtual((as_double(&self.low) + as_double(&self.high)) / 2.0)
    }

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

/// A wanted fraction as the resampler of a crossing can best make it: by itself, on average, or by
/// the nearest single ratio. Lazy switching takes no more than `swing` samples of the room, if it
/// can do with that.
pub(crate) fn realise(wanted: Fraction, declaration: &CrossingDeclaration, swing: f64) -> Way {
    let bounds = &declaration.bounds;
    let on_average = match declaration.realisation {
        Realisation::Single => None,
        Realisation::Stepping => return stepping(wanted, bounds.max_l()),
        Realisation::Cadence | Realisation::Lazy => in_turn(wanted, declaration, swing),
    };
    on_average.unwrap_or_else(|| nearest_single(wanted, bounds))
}

/// The single ratio within the bounds that is nearest to what is wanted.
pub(crate) fn nearest_single(wanted: Fraction, bounds: &Bounds) -> Way {
    let nearest = best(&exact(&wanted), bounds);
    Way {
        wanted,
        realised: Realised::Single(nearest.ratio),
        certificate: nearest.certificate,
    }
}

/// Two neighbouring ratios in turn, where no single one will do and there are two.
fn in_turn(wanted: Fraction, declaration: &CrossingDeclaration, swing: f64) -> Option<Way> {
    let bounds = &declaration.bounds;
    if bounds.allow(&wanted) {
        return None;
    }
    let cadence = Cadence::new(&exact(&wanted), bounds).ok()?;
    let realised = match declaration.realisation {
        Realisation::Lazy => Realised::Lazy {
            cadence,
            swing_samples: swing.max(pair_error(&cadence.low(), &cadence.high())),
        },
        _ => Realised::Cadence(cadence),
    };
    Some(Way {
        wanted,
        realised,
        certificate: cadence.certificate(bounds),
    })
}

/// A table of phases makes any ratio up to their number, but nothing above it.
fn stepping(wanted: Fraction, phases: u64) -> Way {
    let largest = Fraction::from_integer(phases);
    let nearest = wanted.min(largest);
    // Only parts of nominal rates can be too fine for it, and a virtual rate never is.
    let made = [nearest, nearest_virtual(as_double(&nearest)).min(largest)]
        .into_iter()
        .find_map(|ratio| Some((ratio, Stepping::new(&exact(&ratio), phases).ok()?)));
    let (wanted, stepping) =
        made.expect("virtual rates have numerators up to 2^53 and denominators up to 2^31");
    Way {
        wanted,
        realised: Realised::Stepping(stepping),
        certificate: stepping.certificate(),
    }
}

/// How far lazy switching may swing where nothing is in its way.
pub(crate) fn full_swing(declaration: &CrossingDeclaration) -> f64 {
    SWING_SHARE * declaration.headroom_samples
}

/// How far what realises a ratio near the target may err at most, in output samples. 0 if nothing
/// errs; `None` if the bounds cannot make the target at all.
///
/// A cadence of a/b < c/d with bc − ad = δ errs by δ/(2·min(b, d)) whatever lies between, and by
/// what a change of pair carries over; lazy switching by its swing; a table of L phases at the
/// ratio t by half a phase, t/(2L), and by what a change carries over, half a phase at most.
pub(crate) fn own_error(target: &Exact, declaration: &CrossingDeclaration) -> Option<f64> {
    let bounds = &declaration.bounds;
    match declaration.realisation {
        Realisation::Single => Some(0.0),
        Realisation::Cadence => cadence_error(target, bounds),
        Realisation::Lazy => cadence_error(target, bounds)
            .map(|error| full_swing(declaration).max(error) + CARRIED_SAMPLES),
        Realisation::Stepping => {
            let (ratio, phases) = (double(target), bounds.max_l() as f64);
            (ratio <= phases).then_some(ratio / phases)
        }
    }
}

pub(crate) fn double(exact: &Exact) -> f64 {
    *exact.numer() as f64 / *exact.denom() as f64
}

/// The error of the cadence around a target; 0 if it needs none, `None` if no two ratios of the
/// bounds enclose it.
fn cadence_error(target: &Exact, bounds: &Bounds) -> Option<f64> {
    match Cadence::new(target, bounds) {
        Ok(cadence) => Some(pair_error(&cadence.low(), &cadence.high())),
        Err(ratewright_ratio::CadenceError::SingleRatio { .. }) => Some(0.0),
        Err(_) => None,
    }
}

/// The same for two given ratios.
pub(crate) fn pair_error(low: &Fraction, high: &Fraction) -> f64 {
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
        Realised::Cadence(cadence) => pair_error(&cadence.low(), &cadence.high()),
        Realised::Stepping(stepping) => double(&stepping.wanted()) / stepping.phases() as f64,
        Realised::Lazy { swing_samples, .. } => swing_samples + CARRIED_SAMPLES,
    }
}

/// The smallest bounds within which what realises the target errs by less than `room` samples, or
/// `None` if there are none (bounds on prime factors are not searched).
///
/// The two neighbours around a target have growing denominators as M may grow, so the error
/// falls, and the first M that does is found by bisection.
pub(crate) fn bounds_for(
    target: &Exact,
    declaration: &CrossingDeclaration,
    room: f64,
) -> Option<Bounds> {
    let bounds = &declaration.bounds;
    if bounds.largest_prime().is_some() || room <= 0.0 {
        return None;
    }
    let ratio = double(target);
    if declaration.realisation == Realisation::Stepping {
        let phases = (ratio / room).max(ratio).floor() + 1.0;
        return Bounds::new(phases as u64, bounds.max_m()).ok();
    }
    let boxed = |m: u64| Bounds::new((ratio * m as f64).ceil() as u64 + 1, m).ok();
    let does = |m: u64| {
        let error = boxed(m).and_then(|bounds| cadence_error(target, &bounds));
        error.is_some_and(|error| error < room)
    };
    let (mut fails, mut holds) = (0, MAX_VIRTUAL);
    if !does(holds) {
        return None;
    }
    while holds - fails > 1 {
        let middle = fails + (holds - fails) / 2;
        if does(middle) {
            holds = middle;
        } else {
            fails = middle;
        }
    }
    match Cadence::new(target, &boxed(holds)?) {
        Ok(cadence) => {
            let (low, high) = (cadence.low(), cadence.high());
            let largest = |a: &u64, b: &u64| *a.max(b);
            Bounds::new(
                largest(low.numer(), high.numer()),
                largest(low.denom(), high.denom()),
            )
            .ok()
        }
        Err(ratewright_ratio::CadenceError::SingleRatio { ratio }) => {
            Bounds::new(*ratio.numer(), *ratio.denom()).ok()
        }
        Err(_) => None,
    }
}
