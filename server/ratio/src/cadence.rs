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
//! **Theorem (block ends).** Serve the high ratio iff e < θ, θ = ⌊(y − x + 1)/2⌋. From e = 0 the error then
//! stays in θ − y ≤ e ≤ θ + x − 1, so that max |e| = ⌊(x + y)/2⌋ units, which is at most 1/(2·min(b,d))
//! output samples for neighbours, and no order of the blocks does better.
//!
//! **Proof.** If e < θ then e + x ≤ θ + x − 1; else e − y ≥ θ − y: the window of x + y integers maps to itself,
//! and 0 is in it. The map is a rotation by x modulo x + y, which is coprime to x, so every integer of the
//! window is visited, and θ centres the window on zero. Any order that repeats must change by multiples that
//! visit all residues modulo x + y, so its values cannot all lie in a shorter window. ∎
//!
//! **Cost.** One comparison and one addition a block.
//!
//! **Corner cases.** A wanted fraction within the bounds needs no cadence. One outside 1/`max_m` to `max_l`
//! cannot have one. A headroom below [`Cadence::error_bound`] cannot be kept by any cadence of this pair.

use num_integer::Integer;
use num_rational::Ratio;
use serde::{Deserialize, Serialize};
use thiserror::Error;

use crate::bracket::{Bracket, Node};
use crate::wide::Wide;
use crate::{Bounds, Certificate, Claim, Exact, Fraction, Reason, neighbours, smooth};

/// Two ratios with the counts that give the wanted average.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[serde(try_from = "Pair", into = "Pair")]
pub struct Cadence {
    pair: Pair,
    /// Low blocks in a period.
    low_blocks: i64,
    /// High blocks in a period.
    high_blocks: i64,
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
        "wanted {wanted} needs a period of more than 2^62 blocks; accepted are fractions with smaller parts"
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
        let between = Node::from(&low).compare_target(wanted).is_gt()
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
        let unit = x.gcd(&y);
        let count = |blocks: u128| {
            i64::try_from(blocks / unit)
                .ok()
                .filter(|&b| b < 1 << 61)
                .ok_or(too_fine)
        };
        let (low_blocks, high_blocks) = (count(x)?, count(y)?);
        Ok(Self {
            pair: Pair { wanted, low, high },
            low_blocks,
            high_blocks,
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
        self.low_blocks.unsigned_abs()
    }

    /// Blocks of the upper ratio in a period: y.
    pub fn high_blocks(&self) -> u64 {
        self.high_blocks.unsigned_abs()
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
        self.outputs(u128::from(self.period_blocks() / 2))
    }

    /// An error of `units` in output samples.
    fn outputs(&self, units: u128) -> Exact {
        // Divide before multiplying: unit and D share no factor with what the other side needs, and
        // units·g stays below the error of a whole block, which fits.
        let common = self.unit.gcd(self.pair.wanted.denom());
        Exact::new(
            units * (self.unit / common),
            self.pair.wanted.denom() / common,
        )
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
    /// allows. `None` if it is beyond 2^61 units.
    pub fn start_from(self, error: Ratio<i128>) -> Option<CadenceState> {
        let denominator = i128::try_from(*self.pair.wanted.denom()).ok()?;
        let scaled = error.numer().checked_mul(denominator)?;
        let divisor = error.denom().checked_mul(i128::try_from(self.unit).ok()?)?;
        let error =
            i64::try_from((2 * scaled.checked_add(divisor / 2)? + 1).div_euclid(2 * divisor))
                .ok()?;
        (error.abs() < 1 << 61).then_some(CadenceState {
            cadence: self,
            error,
        })
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
    error: i64,
}

impl CadenceState {
    /// The ratio of the next block, to be called once at every block end (of M inputs, L outputs).
    #[inline]
    pub fn next_block(&mut self) -> Fraction {
        let Cadence {
            pair,
            low_blocks,
            high_blocks,
            ..
        } = &self.cadence;
        let threshold = (high_blocks - low_blocks + 1).div_euclid(2);
        if self.error < threshold {
            self.error += low_blocks;
            pair.high
        } else {
            self.error -= high_blocks;
            pair.low
        }
    }

    /// The cadence that is being served.
    pub fn cadence(&self) -> &Cadence {
        &self.cadence
    }

    /// Outputs made − outputs wanted so far, in output samples, exact.
    pub fn error_outputs(&self) -> Ratio<i128> {
        let size = self.cadence.outputs(u128::from(self.error.unsigned_abs()));
        // Below half a block's length, so far below 2^127; D may be larger only if it does not fit i128.
        let sign = i128::from(self.error.signum());
        let part = |x: u128| i128::try_from(x).unwrap_or(i128::MAX);
        Ratio::new_raw(sign * part(*size.numer()), part(*size.denom()))
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
