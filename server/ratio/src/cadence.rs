//! Cadences: two neighbouring ratios served in turn so that the long-run average is exactly the wanted one.
//!
//! A *block* of a ratio a/b takes b input samples and makes a output samples; the ratio may change at block
//! ends. Let a/b < n/D < c/d be the wanted fraction between the two ratios, and δ = bc − ad (1 for
//! neighbours). Then x = (cD − nd)/g low blocks and y = (nb − aD)/g high blocks, g the common divisor of the
//! two, give exactly the wanted average, because x·(a,b) + y·(c,d) = (δ/g)·(n,D).
//!
//! **Sign.** The error e is *outputs made − outputs wanted*, counted in units of g/D output samples: a low
//! block adds −y, a high block +x.
//!
//! **Theorem (block ends).** By the balance rule ([`crate::balance`]) the high ratio is served iff
//! e < θ, θ = ⌊(y − x + 1)/2⌋, and then max |e| = ⌊(x + y)/2⌋ units. For neighbours that is at most
//! 1/(2·min(b,d)) output samples, because x·b + y·d = D; and no order of the blocks does better.
//!
//! **Cost.** One comparison and one addition a block.
//!
//! **Corner cases.** A wanted fraction within the bounds needs no cadence. One outside 1/`max_m` to `max_l`
//! cannot have one. A headroom below [`Cadence::error_bound`] cannot be kept by any cadence of this pair.

use num_bigint::BigUint;
use num_integer::Integer;
use num_rational::Ratio;
use serde::{Deserialize, Serialize};
use thiserror::Error;

use crate::balance::{Balance, MAX_STEP, rounded};
use crate::bracket::{Bracket, Node};
use crate::wide::Wide;
use crate::{Bounds, Certificate, Claim, Exact, Fraction, Reason, neighbours, smooth};

/// Errors of a block, in units of 1/D, stay below this, so that they fit 128 bits with a sign.
const MAX_RAW: u128 = 1 << 125;

/// Two ratios with the counts that give the wanted average.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[serde(try_from = "Pair", into = "Pair")]
pub struct Cadence {
    pair: Pair,
    /// A high block moves the error up by x, a low one down by y. The numbers of blocks in a period are
    /// the same two: x low ones and y high ones.
    balance: Balance,
    /// g of the module's text: the unit of error is g/D outputs.
    unit: u128,
}

/// What a cadence is made from.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
struct Pair {
    wanted: Exact,
    low: Fraction,
    high: Fraction,
}

/// Why there is no cadence.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Error)]
pub enum CadenceError {
    /// The wanted fraction is itself within the bounds.
    #[error("{ratio} is within the bounds itself; a cadence is for what is not")]
    SingleRatio {
        /// The single ratio that does it.
        ratio: Fraction,
    },
    /// The wanted fraction is beyond every ratio allowed.
    #[error(
        "wanted {wanted} has no two ratios around it; accepted is what lies between {smallest} and {largest}"
    )]
    OutOfReach {
        /// The wanted fraction.
        wanted: Exact,
        /// The smallest ratio allowed.
        smallest: Fraction,
        /// The largest ratio allowed.
        largest: Fraction,
    },
    /// The period has too many blocks to count.
    #[error(
        "wanted {wanted} needs a period of more than 2^60 blocks; accepted are fractions with smaller parts"
    )]
    TooFine {
        /// The wanted fraction.
        wanted: Exact,
    },
    /// A pair that does not enclose the wanted fraction.
    #[error("wanted {wanted} is not strictly between low = {low} and high = {high}")]
    NotBetween {
        /// The wanted fraction.
        wanted: Exact,
        /// The lower ratio.
        low: Fraction,
        /// The upper ratio.
        high: Fraction,
    },
}

impl Cadence {
    /// The cadence of the two allowed ratios nearest to `wanted` on either side.
    ///
    /// # Errors
    /// [`CadenceError`]; [`CadenceError::SingleRatio`] carries the ratio to use instead.
    pub fn new(wanted: &Exact, bounds: &Bounds) -> Result<Self, CadenceError> {
        let Bracket { below, above } = match bounds.largest_prime() {
            Some(_) => smooth::neighbours(wanted, bounds),
            None => neighbours(wanted, bounds),
        };
        for end in [below, above] {
            if let Some(ratio) = end.fraction()
                && end.compare_target(wanted).is_eq()
            {
                return Err(CadenceError::SingleRatio { ratio });
            }
        }
        let (Some(low), Some(high)) = (below.fraction(), above.fraction()) else {
            let (smallest, largest) = smooth::extremes(bounds);
            return Err(CadenceError::OutOfReach {
                wanted: *wanted,
                smallest,
                largest,
            });
        };
        Self::of_pair(wanted, low, high)
    }

    /// The cadence of two given ratios with `low < wanted < high`.
    ///
    /// # Errors
    /// [`CadenceError::NotBetween`] or [`CadenceError::TooFine`].
    pub fn of_pair(wanted: &Exact, low: Fraction, high: Fraction) -> Result<Self, CadenceError> {
        let between = low.numer() > &0
            && high.denom() > &0
            && Node::from(&low).compare_target(wanted).is_gt()
            && Node::from(&high).compare_target(wanted).is_lt();
        if !between {
            return Err(CadenceError::NotBetween {
                wanted: *wanted,
                low,
                high,
            });
        }
        let too_fine = CadenceError::TooFine { wanted: *wanted };
        let wanted = wanted.reduced();
        let (n, d) = (*wanted.numer(), *wanted.denom());
        let to_high = Wide::product(d, *high.numer()).minus(Wide::product(n, *high.denom()));
        let from_low = Wide::product(n, *low.denom()).minus(Wide::product(d, *low.numer()));
        let (Some(x), Some(y)) = (to_high.narrow(), from_low.narrow()) else {
            return Err(too_fine);
        };
        if x >= MAX_RAW || y >= MAX_RAW {
            return Err(too_fine);
        }
        let unit = x.gcd(&y);
        let balance = Balance::new(x / unit, y / unit).ok_or(too_fine)?;
        Ok(Self {
            pair: Pair { wanted, low, high },
            balance,
            unit,
        })
    }

    /// The wanted long-run ratio, in lowest terms.
    pub fn wanted(&self) -> &Exact {
        &self.pair.wanted
    }

    /// The lower ratio a/b.
    pub fn low(&self) -> Fraction {
        self.pair.low
    }

    /// The upper ratio c/d.
    pub fn high(&self) -> Fraction {
        self.pair.high
    }

    /// Blocks of the lower ratio in a period: x.
    pub fn low_blocks(&self) -> u64 {
        self.balance.up.unsigned_abs()
    }

    /// Blocks of the upper ratio in a period: y.
    pub fn high_blocks(&self) -> u64 {
        self.balance.down.unsigned_abs()
    }

    /// Blocks in a period: x + y.
    pub fn period_blocks(&self) -> u64 {
        self.low_blocks() + self.high_blocks()
    }

    /// Input samples in a period.
    pub fn period_inputs(&self) -> u128 {
        u128::from(self.low_blocks()) * u128::from(*self.low().denom())
            + u128::from(self.high_blocks()) * u128::from(*self.high().denom())
    }

    /// Output samples in a period.
    pub fn period_outputs(&self) -> u128 {
        u128::from(self.low_blocks()) * u128::from(*self.low().numer())
            + u128::from(self.high_blocks()) * u128::from(*self.high().numer())
    }

    /// The exact bound of |outputs made − outputs wanted| at block ends, in output samples. It is reached.
    ///
    /// # Examples
    /// ```
    /// use ratewright_ratio::{Bounds, Cadence, Exact};
    /// let cadence = Cadence::new(&Exact::new(10_001, 10_000), &Bounds::new(100, 100)?)?;
    /// let at_most = Exact::new(1, 2 * u128::from((*cadence.low().denom()).min(*cadence.high().denom())));
    /// assert!(cadence.error_bound() <= at_most);
    /// # Ok::<(), Box<dyn std::error::Error>>(())
    /// ```
    pub fn error_bound(&self) -> Exact {
        self.outputs(u128::from(self.balance.bound()))
    }

    /// How often the ratio changes, per second, for a source rate in Hz: every block of the rarer ratio
    /// stands alone, so 2·min(x, y) changes a period.
    pub fn switches_per_second(&self, source_rate_hz: f64) -> f64 {
        let rarer = self.low_blocks().min(self.high_blocks());
        2.0 * rarer as f64 * source_rate_hz / self.period_inputs() as f64
    }

    /// An error of `units` in output samples, for units·g below 2^126.
    fn outputs(&self, units: u128) -> Exact {
        let common = self.unit.gcd(self.pair.wanted.denom());
        Exact::new(
            units * (self.unit / common),
            self.pair.wanted.denom() / common,
        )
    }

    /// The same with a sign.
    pub(crate) fn signed_outputs(&self, units: i64) -> Ratio<i128> {
        let size = self.outputs(u128::from(units.unsigned_abs()));
        let part = |x: u128| {
            i128::try_from(x)
                .expect("units·g is below 2^126, and D below a period of 2^125 samples")
        };
        Ratio::new_raw(
            i128::from(units.signum()) * part(*size.numer()),
            part(*size.denom()),
        )
    }

    /// ⌊headroom⌋ in units of error, for a headroom in output samples; at most what an error may be.
    pub(crate) fn units_within(&self, headroom: &Exact) -> i64 {
        let product = |a: u128, b: u128| BigUint::from(a) * b;
        let whole = product(*headroom.numer(), *self.pair.wanted.denom());
        let units = whole / product(*headroom.denom(), self.unit);
        let largest = (MAX_RAW / self.unit).min(MAX_STEP as u128);
        u128::try_from(units).map_or(largest, |units| units.min(largest)) as i64
    }

    /// The two steps of the error.
    pub(crate) fn balance(&self) -> Balance {
        self.balance
    }

    /// The proof that nothing allowed lies between the two ratios; none if prime factors were bounded and
    /// something of the box does lie between.
    pub fn certificate(&self, bounds: &Bounds) -> Certificate {
        let (low, high) = (self.low(), self.high());
        let pair = Certificate::NeighbourPair(Bracket {
            below: (&low).into(),
            above: (&high).into(),
        });
        let claim = Claim::NeighbourPair {
            low,
            high,
            target: self.wanted(),
            region: bounds.into(),
        };
        match pair.verify(&claim) {
            Ok(()) => pair,
            Err(_) => Certificate::Uncertified(Reason::SmoothBounds),
        }
    }

    /// The sequence from its start, error zero.
    pub fn start(self) -> CadenceState {
        CadenceState {
            cadence: self,
            error: 0,
        }
    }
}

impl Cadence {
    /// The sequence with an error carried over from what was served before, in output samples
    /// (made − wanted). It is rounded to the nearest unit of this cadence, at most half of one
    /// (1/(2D) output samples for neighbours), and is brought within the bound at the fastest rate the pair
    /// allows. `None` if it is beyond 2^60 units, or the arithmetic beyond 128 bits.
    pub fn start_from(self, error: Ratio<i128>) -> Option<CadenceState> {
        let error = self.units_of(error)?;
        Some(CadenceState {
            cadence: self,
            error,
        })
    }

    /// An error in output samples, in units, rounded to the nearest.
    pub(crate) fn units_of(&self, error: Ratio<i128>) -> Option<i64> {
        let largest = (MAX_RAW / self.unit).min(MAX_STEP as u128);
        rounded(error, *self.pair.wanted.denom(), self.unit)
            .filter(|&e| u128::from(e.unsigned_abs()) <= largest)
    }
}

/// Where a cadence stands between two blocks. Plain data: copy it, save it, restore it.
///
/// # Examples
/// A high block makes more than is wanted, so the error rises:
/// ```
/// use ratewright_ratio::{Bounds, Cadence, Exact};
/// let cadence = Cadence::new(&Exact::new(101, 100), &Bounds::new(10, 10)?)?;
/// let mut state = cadence.start();
/// let before = state.error_outputs();
/// let block = state.next_block();
/// assert_eq!(block == cadence.high(), state.error_outputs() > before);
/// # Ok::<(), Box<dyn std::error::Error>>(())
/// ```
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct CadenceState {
    cadence: Cadence,
    /// Outputs made − outputs wanted, in units of the cadence.
    #[serde(deserialize_with = "crate::balance::saved_error")]
    error: i64,
}

impl CadenceState {
    /// The ratio of the next block, to be called once at every block end (of M inputs, L outputs).
    #[inline]
    pub fn next_block(&mut self) -> Fraction {
        let Cadence { pair, balance, .. } = &self.cadence;
        let up = balance.is_up(self.error);
        self.error = balance.after(self.error, up);
        if up { pair.high } else { pair.low }
    }

    /// The cadence that is being served.
    pub fn cadence(&self) -> &Cadence {
        &self.cadence
    }

    /// Outputs made − outputs wanted so far, in output samples, exact.
    pub fn error_outputs(&self) -> Ratio<i128> {
        self.cadence.signed_outputs(self.error)
    }
}

impl TryFrom<Pair> for Cadence {
    type Error = CadenceError;

    fn try_from(pair: Pair) -> Result<Self, CadenceError> {
        Self::of_pair(&pair.wanted, pair.low, pair.high)
    }
}

impl From<Cadence> for Pair {
    fn from(cadence: Cadence) -> Self {
        cadence.pair
    }
}
