//! Lazy cadences: change the ratio only when the error would leave the headroom.
//!
//! **Theorem.** Hold the ratio while the next block keeps |e| ≤ E, else change. If E is at least the bound of
//! the balanced cadence, ⌊(x + y)/2⌋ units, the change always keeps |e| ≤ E. (If e − y < −E then
//! e + x ≤ x + y − 1 − E ≤ E, and likewise upwards.) Each hold runs across the whole headroom, so there are about
//! `f_in·(t − r₀)(r₁ − t)/(E(r₁ − r₀))` changes a second between r₀ and r₁, for E well above one block's error.
//! From outside, each block takes the choice that leaves the smaller |e|, so it returns at the fastest rate.
//!
//! **Sign.** As in [`crate::cadence`]: outputs made − outputs wanted, so a high block adds.
//!
//! **Cost.** One addition and one comparison a block.
//!
//! **Corner cases.** A headroom below the bound of the balanced cadence is refused, as no order of the blocks keeps
//! it. The number of changes is an estimate: a hold ends at the last whole block within the headroom.

use num_rational::Ratio;
use serde::{Deserialize, Serialize};
use thiserror::Error;

use crate::balance::MAX_STEP;
use crate::{Cadence, Exact, Fraction};

/// Where a lazy cadence stands between two blocks. Plain data: copy it, save it, restore it.
///
/// # Examples
/// ```
/// use ratewright_ratio::{Bounds, Cadence, Exact, Lazy};
/// let cadence = Cadence::new(&Exact::new(1_000_037, 1_000_000), &Bounds::new(256, 256)?)?;
/// let mut lazy = Lazy::new(cadence, &Exact::new(4, 1))?;
/// let changes = (0..100_000).map(|_| lazy.next_block()).collect::<Vec<_>>().windows(2).filter(|w| w[0] != w[1]).count();
/// assert!(changes < 1_000, "{changes}");
/// # Ok::<(), Box<dyn std::error::Error>>(())
/// ```
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[serde(try_from = "Unchecked", into = "Unchecked")]
pub struct Lazy {
    cadence: Cadence,
    limit: i64,
    serves_high: bool,
    error: i64,
}

/// Why a lazy cadence was refused.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Error)]
pub enum LazyError {
    /// A headroom below the bound of the balanced cadence, which no order of blocks can keep.
    #[error(
        "headroom is {headroom} samples; accepted is at least {least}, the error bound of the cadence"
    )]
    HeadroomTooSmall {
        /// The refused headroom, output samples.
        headroom: Exact,
        /// The cadence's error bound, output samples.
        least: Exact,
    },
    /// A saved state that no sequence reaches.
    #[error(
        "saved error {error} and headroom {limit}, in units of the cadence; accepted is an error within ±2^60 and \
         a headroom from the cadence's bound to 2^60"
    )]
    Saved {
        /// The saved error.
        error: i64,
        /// The saved headroom.
        limit: i64,
    },
}

impl Lazy {
    /// The lazy form of a cadence within ±`headroom` output samples, from error zero.
    ///
    /// # Errors
    /// [`LazyError::HeadroomTooSmall`].
    pub fn new(cadence: Cadence, headroom: &Exact) -> Result<Self, LazyError> {
        let limit = cadence.units_within(headroom);
        if limit.unsigned_abs() < cadence.balance().bound() {
            let least = cadence.error_bound();
            return Err(LazyError::HeadroomTooSmall {
                headroom: *headroom,
                least,
            });
        }
        Ok(Self {
            cadence,
            limit,
            serves_high: false,
            error: 0,
        })
    }

    /// The same with an error carried over from what was served before, as in [`Cadence::start_from`]; it
    /// begins with the ratio that brings the error down.
    #[must_use]
    pub fn start_from(self, error: Ratio<i128>) -> Option<Self> {
        let error = self.cadence.units_of(error)?;
        let serves_high = error < 0;
        Some(Self {
            error,
            serves_high,
            ..self
        })
    }

    /// The ratio of the next block, to be called once at every block end.
    #[inline]
    pub fn next_block(&mut self) -> Fraction {
        let balance = self.cadence.balance();
        let held = balance.after(self.error, self.serves_high);
        let other = balance.after(self.error, !self.serves_high);
        if held.abs() <= self.limit || held.abs() <= other.abs() {
            self.error = held;
        } else {
            self.serves_high = !self.serves_high;
            self.error = other;
        }
        if self.serves_high {
            self.cadence.high()
        } else {
            self.cadence.low()
        }
    }

    /// Outputs made − outputs wanted so far, in output samples, exact.
    pub fn error_outputs(&self) -> Ratio<i128> {
        self.cadence.signed_outputs(self.error)
    }

    /// The cadence that is being served.
    pub fn cadence(&self) -> &Cadence {
        &self.cadence
    }

    /// The swing, in output samples, exact: how far the error may be off, either way, in whole units of the cadence.
    pub fn swing(&self) -> Exact {
        let swing = self.cadence.signed_outputs(self.limit);
        let part = |x: &i128| u128::try_from(*x).expect("the limit is not negative");
        Exact::new(part(swing.numer()), part(swing.denom()))
    }

    /// The expected number of changes a second, for a source rate in Hz (the theorem's estimate).
    pub fn switches_per_second(&self, source_rate_hz: f64) -> f64 {
        // One cycle of two holds: 2E/y low blocks and 2E/x high ones.
        let balance = self.cadence.balance();
        let (x, y, span) = (
            balance.up as f64,
            balance.down as f64,
            2.0 * self.limit as f64,
        );
        let inputs = span / y * *self.cadence.low().denom() as f64
            + span / x * *self.cadence.high().denom() as f64;
        2.0 * source_rate_hz / inputs
    }
}

#[derive(Serialize, Deserialize)]
struct Unchecked {
    cadence: Cadence,
    limit: i64,
    serves_high: bool,
    error: i64,
}

impl TryFrom<Unchecked> for Lazy {
    type Error = LazyError;

    fn try_from(raw: Unchecked) -> Result<Self, LazyError> {
        let Unchecked {
            cadence,
            limit,
            serves_high,
            error,
        } = raw;
        let bound = i64::try_from(cadence.balance().bound()).unwrap_or(MAX_STEP);
        // A carried error may be beyond the headroom.
        if limit < bound || limit > MAX_STEP || error.checked_abs().is_none_or(|e| e > MAX_STEP) {
            return Err(LazyError::Saved { error, limit });
        }
        Ok(Self {
            cadence,
            limit,
            serves_high,
            error,
        })
    }
}

impl From<Lazy> for Unchecked {
    fn from(lazy: Lazy) -> Self {
        let Lazy {
            cadence,
            limit,
            serves_high,
            error,
        } = lazy;
        Self {
            cadence,
            limit,
            serves_high,
            error,
        }
    }
}
