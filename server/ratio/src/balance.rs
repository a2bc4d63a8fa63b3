//! The balance rule: two choices that push an error up or down, taken so that it stays as small as can be.
//!
//! **Theorem.** Let the error move by +x or by −y, integers from 1 without a common factor. Take the upward
//! choice iff e < θ, θ = ⌊(y − x + 1)/2⌋. From any start within it, e stays in [θ − y, θ + x − 1], so
//! |e| ≤ ⌊(x + y)/2⌋; from outside it returns there by steps of one direction. The bound is reached, and no
//! endless sequence of the two choices does better.
//!
//! **Proof.** If e < θ then e + x ≤ θ + x − 1; else e − y ≥ θ − y: the window of x + y integers maps to
//! itself. Modulo x + y both choices add x, which has no common factor with x + y, so every endless sequence
//! visits all x + y residues, and no set of x + y residues fits in a symmetric interval shorter than
//! ±⌊(x + y)/2⌋. The window [θ − y, θ + x − 1] is centred: θ − y = −⌊(x + y)/2⌋ and θ + x − 1 = ⌊(x + y − 1)/2⌋. ∎

use num_rational::Ratio;
use serde::{Deserialize, Deserializer, Serialize, de};

/// The largest step: sums of two steps and of an error stay far within 64 bits.
pub(crate) const MAX_STEP: i64 = 1 << 60;

/// The two steps, each from 1 to [`MAX_STEP`], without a common factor.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub(crate) struct Balance {
    pub(crate) up: i64,
    pub(crate) down: i64,
}

impl Balance {
    /// The steps, if both are in range.
    pub(crate) fn new(up: u128, down: u128) -> Option<Self> {
        let step = |x: u128| i64::try_from(x).ok().filter(|x| (1..=MAX_STEP).contains(x));
        Some(Self {
            up: step(up)?,
            down: step(down)?,
        })
    }

    /// True if the next choice is the upward one.
    #[inline]
    pub(crate) fn is_up(self, error: i64) -> bool {
        // The shift is a floor division, also below zero.
        error < (self.down - self.up + 1) >> 1
    }

    /// The error after a choice.
    #[inline]
    pub(crate) fn after(self, error: i64, up: bool) -> i64 {
        if up {
            error + self.up
        } else {
            error - self.down
        }
    }

    /// The exact bound of |error|.
    pub(crate) fn bound(self) -> u64 {
        (self.up.unsigned_abs() + self.down.unsigned_abs()) / 2
    }
}

/// `error`·`scale`/`unit` rounded to the nearest integer; `None` beyond [`MAX_STEP`], or if the arithmetic is
/// beyond 128 bits.
pub(crate) fn rounded(error: Ratio<i128>, scale: u128, unit: u128) -> Option<i64> {
    let part = |x: u128| i128::try_from(x).ok();
    let twice = error.numer().checked_mul(2)?.checked_mul(part(scale)?)?;
    let divisor = error.denom().checked_mul(part(unit)?)?;
    let units = twice
        .checked_add(divisor)?
        .div_euclid(divisor.checked_mul(2)?);
    i64::try_from(units)
        .ok()
        .filter(|e| e.unsigned_abs() <= MAX_STEP.unsigned_abs())
}

/// Reads a saved error, refusing what no sequence reaches.
pub(crate) fn saved_error<'de, D: Deserializer<'de>>(deserializer: D) -> Result<i64, D::Error> {
    let error = i64::deserialize(deserializer)?;
    if error.checked_abs().is_some_and(|size| size <= MAX_STEP) {
        return Ok(error);
    }
    Err(de::Error::invalid_value(
        de::Unexpected::Signed(error),
        &"an error within ±2^60 units",
    ))
}
