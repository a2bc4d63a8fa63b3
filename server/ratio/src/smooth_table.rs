//! A table of smooth ratios near a band, for many look-ups under the same bounds.
//!
//! **Method.** All reduced ratios of the band with smooth parts, in ascending order, with an index of equal
//! slices of the band. A look-up goes to the slice by one multiplication of doubles, which is only a guess:
//! the step to the right place and the choice between its two ends are exact.
//!
//! **Cost.** The build visits every pair in the band, and needs 16 bytes a ratio; a look-up takes a few
//! comparisons, however large the bounds are.
//!
//! **Corner case.** A target outside the band is looked for by the two lists instead, with the same answer.

use num_integer::Integer;

use crate::bracket::{Bracket, Node};
use crate::nearest::nearer;
use crate::{Best, Bounds, Certificate, Exact, Interval, Reason, best, smooth};

/// Slices of the index for each ratio: most then hold one at most.
const SLICES_PER_RATIO: usize = 4;

/// Smooth ratios within bounds and near a band, ready for look-ups.
#[derive(Clone, Debug)]
pub struct SmoothTable {
    bounds: Bounds,
    /// Parts fit 32 bits because the bounds are at most 2^20.
    ratios: Vec<(u32, u32)>,
    /// For slice i of the band, the first ratio that is not below the slice.
    slices: Vec<u32>,
    low: f64,
    slices_per_one: f64,
}

impl SmoothTable {
    /// The table of all ratios in `band` within `bounds`. Without a largest prime factor there is nothing to
    /// hold: the table stays empty, and look-ups search.
    ///
    /// # Examples
    /// ```
    /// use ratewright_ratio::{Bounds, Exact, Fraction, Interval, SmoothTable};
    /// let bounds = Bounds::new(1_000, 1_000)?.with_largest_prime(7)?;
    /// let table = SmoothTable::new(&bounds, &Interval::closed(Exact::new(9, 10), Exact::new(11, 10))?);
    /// assert_eq!(table.best(&Exact::new(48_001, 44_100)).ratio, Fraction::new(160, 147));
    /// # Ok::<(), Box<dyn std::error::Error>>(())
    /// ```
    pub fn new(bounds: &Bounds, band: &Interval) -> Self {
        let mut ratios = match bounds.largest_prime() {
            Some(_) => in_band(bounds, band),
            None => Vec::new(),
        };
        ratios.sort_unstable_by(|a, b| order(*a, *b));
        let (low, high) = (value(band.lo()), value(band.hi()));
        let count = SLICES_PER_RATIO * ratios.len().max(1);
        let slices_per_one = count as f64 / (high - low).max(f64::MIN_POSITIVE);
        let mut table = Self {
            bounds: *bounds,
            ratios,
            slices: Vec::new(),
            low,
            slices_per_one,
        };
        table.slices = table.index(count);
        table
    }

    /// The number of ratios held.
    pub fn len(&self) -> usize {
        self.ratios.len()
    }

    /// True if no ratio is held; look-ups work all the same.
    pub fn is_empty(&self) -> bool {
        self.ratios.is_empty()
    }

    /// The nearest ratio to `target` within the bounds; on a tie the smaller M, then the smaller L.
    pub fn best(&self, target: &Exact) -> Best {
        let Some(bracket) = self.bracket(target) else {
            return best(target, &self.bounds);
        };
        let ratio = nearer(&bracket, target);
        Best {
            ratio,
            certificate: Certificate::Uncertified(Reason::SmoothBounds),
        }
    }

    /// The ratios on either side, if both are in the table; then nothing outside the band can be nearer.
    #[inline]
    fn bracket(&self, target: &Exact) -> Option<Bracket> {
        let node = |i: usize| {
            let (l, m) = self.ratios[i];
            Node {
                l: u64::from(l),
                m: u64::from(m),
            }
        };
        let is_below = |i: usize| node(i).compare_target(target).is_gt();
        let mut at = self.guess(value(target));
        // `at` becomes the first ratio that is not below the target.
        while at > 0 && !is_below(at - 1) {
            at -= 1;
        }
        while at < self.ratios.len() && is_below(at) {
            at += 1;
        }
        (at > 0 && at < self.ratios.len()).then(|| Bracket {
            below: node(at - 1),
            above: node(at),
        })
    }

    fn guess(&self, value: f64) -> usize {
        // The cast saturates, so a target far outside lands at an end.
        let slice = ((value - self.low) * self.slices_per_one) as usize;
        self.slices[slice.min(self.slices.len() - 1)] as usize
    }

    fn index(&self, count: usize) -> Vec<u32> {
        let mut slices = Vec::with_capacity(count + 1);
        for (i, &(l, m)) in self.ratios.iter().enumerate() {
            let slice = ((f64::from(l) / f64::from(m) - self.low) * self.slices_per_one) as usize;
            while slices.len() <= slice.min(count) {
                slices.push(i as u32);
            }
        }
        slices.resize(count + 1, self.ratios.len() as u32);
        slices
    }
}

/// A target as a double, near enough for a guess.
#[inline]
fn value(target: &Exact) -> f64 {
    match (
        u64::try_from(*target.numer()),
        u64::try_from(*target.denom()),
    ) {
        (Ok(n), Ok(d)) => n as f64 / d as f64,
        _ => *target.numer() as f64 / *target.denom() as f64,
    }
}

/// All reduced ratios of the band with allowed parts, in no order.
fn in_band(bounds: &Bounds, band: &Interval) -> Vec<(u32, u32)> {
    let allowed_l = smooth::smooth_numbers(bounds.max_l(), bounds.largest_prime());
    let sharing = |numbers: &[u64]| {
        numbers
            .iter()
            .map(|&n| small_factors(n))
            .collect::<Vec<_>>()
    };
    let factors_l = sharing(&allowed_l);
    let mut ratios = Vec::new();
    for m in smooth::smooth_numbers(bounds.max_m(), bounds.largest_prime()) {
        let factors_m = small_factors(m);
        let first = allowed_l.partition_point(|&l| !band.is_above_low(l, m));
        for (&l, &factors_l) in allowed_l[first..].iter().zip(&factors_l[first..]) {
            if !band.is_below_high(l, m) {
                break;
            }
            // A common small factor, which most have, spares the greatest common divisor.
            if factors_l & factors_m == 0 && l.gcd(&m) == 1 {
                ratios.push((l as u32, m as u32));
            }
        }
    }
    ratios
}

/// Which of the first primes divide `n`, as bits.
fn small_factors(n: u64) -> u8 {
    let primes = [2, 3, 5, 7, 11, 13, 17, 19];
    (0..8).fold(0, |bits, i| {
        bits | u8::from(n.is_multiple_of(primes[i])) << i
    })
}

/// Orders fractions by value.
fn order((a, b): (u32, u32), (c, d): (u32, u32)) -> std::cmp::Ordering {
    (u64::from(a) * u64::from(d)).cmp(&(u64::from(c) * u64::from(b)))
}
