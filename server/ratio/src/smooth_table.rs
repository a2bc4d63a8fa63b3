//! A table of smooth ratios near a band, for many look-ups under the same bounds.
//!
//! **Method.** All reduced ratios of the band with smooth parts, in ascending order; the middles between
//! neighbours, as doubles; and an index of equal slices of the band. A look-up goes to the slice by one
//! multiplication and on to the two middles around the target. Targets and middles are doubles within 2^-50 of
//! their value, so a target farther than that from both middles has its answer; otherwise integers decide.
//!
//! **Cost.** The build visits every pair in the band, and needs 32 bytes a ratio; a look-up takes one division and
//! a few comparisons, however large the bounds are.
//!
//! **Corner case.** A target outside the band is looked for by the two lists instead, with the same answer.

use num_integer::Integer;

use crate::nearest::nearer_of;
use crate::{Best, Bounds, Certificate, Exact, Fraction, Interval, Reason, best, smooth};

/// Slices of the index for each ratio: most then hold one middle at most.
const SLICES_PER_RATIO: usize = 4;

/// What a double here may be off, as a part of itself, with room to spare; two middles are 2^-41 apart at least.
const DOUBT: f64 = 1.0 / (1u64 << 48) as f64;

/// Smooth ratios within bounds and near a band, ready for look-ups.
#[derive(Clone, Debug)]
pub struct SmoothTable {
    bounds: Bounds,
    /// Parts fit 32 bits because the bounds are at most 2^20.
    ratios: Vec<(u32, u32)>,
    /// Ratio i is the nearest from middle i to middle i + 1; infinite before the first and after the last.
    middles: Vec<f64>,
    /// For slice i of the band, the ratio at its start or an earlier one.
    slices: Vec<u32>,
    low: f64,
    slices_per_one: f64,
    /// For sure between two ratios of the table, so nothing outside the band is nearer.
    covered: std::ops::Range<f64>,
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
        let between = ratios
            .windows(2)
            .map(|two| (quotient(two[0]) + quotient(two[1])) / 2.0);
        let middles = [f64::NEG_INFINITY]
            .into_iter()
            .chain(between)
            .chain([f64::INFINITY])
            .collect();
        let covered = match (ratios.first(), ratios.last()) {
            (Some(&first), Some(&last)) => {
                quotient(first) * (1.0 + DOUBT)..quotient(last) * (1.0 - DOUBT)
            }
            _ => 0.0..0.0,
        };
        let mut table = Self {
            bounds: *bounds,
            ratios,
            middles,
            slices: Vec::with_capacity(count),
            low,
            slices_per_one,
            covered,
        };
        let mut at = 0;
        for slice in 0..count {
            // By the same rounded formula as in a look-up, which never falls as values rise.
            while table
                .middles
                .get(at + 1)
                .is_some_and(|&middle| table.slice(middle) < slice)
            {
                at += 1;
            }
            table.slices.push(at as u32);
        }
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
        let value = value(target);
        if !self.covered.contains(&value) {
            return best(target, &self.bounds);
        }
        let mut at = self.slices[self.slice(value).min(self.slices.len() - 1)] as usize;
        while self.middles[at + 1] < value {
            at += 1;
        }
        let doubt = value * DOUBT;
        let is_sure = (value - self.middles[at] > doubt) & (self.middles[at + 1] - value > doubt);
        Best {
            ratio: if is_sure {
                self.ratio(at)
            } else {
                self.nearest_around(at, target)
            },
            certificate: Certificate::Uncertified(Reason::SmoothBounds),
        }
    }

    /// The nearest of a ratio and its two neighbours, by integers.
    #[cold]
    fn nearest_around(&self, at: usize, target: &Exact) -> Fraction {
        let last = self.ratios.len() - 1;
        (at.saturating_sub(1)..=(at + 1).min(last))
            .map(|i| self.ratio(i))
            .reduce(|a, b| nearer_of(a, b, target))
            .expect("at is one of them")
    }

    #[inline]
    fn ratio(&self, at: usize) -> Fraction {
        let (l, m) = self.ratios[at];
        Fraction::new_raw(l.into(), m.into())
    }

    /// The slice of a value in the band; a signed cast is the shorter one, and saturates.
    #[inline]
    fn slice(&self, value: f64) -> usize {
        ((value - self.low) * self.slices_per_one) as i64 as usize
    }
}

#[inline]
fn quotient((l, m): (u32, u32)) -> f64 {
    f64::from(l) / f64::from(m)
}

/// A target as a double, within a part of 2^-51.
#[inline]
fn value(target: &Exact) -> f64 {
    let (n, d) = (*target.numer(), *target.denom());
    if (n | d) >> 63 != 0 {
        return n as f64 / d as f64;
    }
    // Signed integers become doubles in one step. The inverse of a power of two, the D of a double, is exact.
    let (n, d) = (n as i64, d as u64);
    if d.is_power_of_two() {
        let inverse = f64::from_bits(u64::from(1023 - d.trailing_zeros()) << 52);
        return n as f64 * inverse;
    }
    n as f64 / d as i64 as f64
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
