//! Stepping: one filter table of L phases, and at every output an advance of A phases or of A + 1.
//!
//! One output is wanted every L/t phases. With t = n/D and A = ⌊L·D/n⌋, an advance of A is short by
//! r = L·D − A·n and one of A + 1 long by n − r, in units of 1/n phase, so the balance rule ([`crate::balance`])
//! gives the best sequence.
//!
//! **Sign.** The error is *outputs made − outputs wanted*. A longer advance takes more input for the same
//! output, so it makes less: e_outputs = −(phases advanced − phases wanted)·t/L.
//!
//! **Theorem.** max |e| ≤ t/(2L) output samples, since the phase is at most half a phase off. For equal memory
//! (L = a + c coefficients sets) that is below the bound of a block-end cadence.
//!
//! **Cost.** One comparison and one addition an output.
//!
//! **Corner cases.** The advance is at least 1, so t is at most L. If n divides L·D one advance is exact.

use num_integer::Integer;
use num_rational::Ratio;
use serde::{Deserialize, Serialize};
use thiserror::Error;

use crate::balance::{Balance, rounded};
use crate::{Certificate, Exact, SteppingPair};

/// A table of phases with the two advances that give the wanted ratio on average.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[serde(try_from = "Wanted", into = "Wanted")]
pub struct Stepping {
    wanted: Wanted,
    advance: u64,
    /// `None` if `advance` is exact.
    balance: Option<Balance>,
    /// Units of error a phase: the unit is 1/scale phase.
    scale: u64,
}

#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
struct Wanted {
    ratio: Exact,
    phases: u64,
}

/// Why there is no stepping.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Error)]
pub enum SteppingError {
    /// Fewer phases than outputs an input.
    #[error(
        "phases is {phases}, below the wanted ratio {wanted}; accepted are {wanted} and more, up to 2^63 − 1"
    )]
    TooFewPhases {
        /// The refused number.
        phases: u64,
        /// The wanted ratio.
        wanted: Exact,
    },
    /// The wanted fraction has too large parts.
    #[error(
        "wanted {wanted} is zero or its parts are too large; accepted are numerators up to 2^60 and phases·denominator below 2^124"
    )]
    TooFine {
        /// The wanted ratio.
        wanted: Exact,
    },
}

impl Stepping {
    /// Stepping at the wanted ratio with a table of `phases` phases (1 to 2^63 − 1).
    ///
    /// # Errors
    /// [`SteppingError`].
    ///
    /// # Examples
    /// ```
    /// use ratewright_ratio::{Exact, Stepping};
    /// let stepping = Stepping::new(&Exact::new(1_000_037, 1_000_000), 256)?;
    /// assert_eq!(stepping.advances(), (255, 256));
    /// // No more than t/(2L) output samples.
    /// assert!(stepping.error_bound() <= stepping.wanted() / Exact::from_integer(2 * 256));
    /// # Ok::<(), ratewright_ratio::SteppingError>(())
    /// ```
    pub fn new(wanted: &Exact, phases: u64) -> Result<Self, SteppingError> {
        let ratio = wanted.reduced();
        let too_fine = SteppingError::TooFine { wanted: ratio };
        let (n, d) = (*ratio.numer(), *ratio.denom());
        let total = d
            .checked_mul(u128::from(phases))
            .filter(|&total| total < 1 << 124)
            .ok_or(too_fine)?;
        if n == 0 {
            return Err(too_fine);
        }
        let (advance, short) = total.div_rem(&n);
        if advance == 0 || phases > crate::MAX_BOUND {
            return Err(SteppingError::TooFewPhases {
                phases,
                wanted: ratio,
            });
        }
        let advance = u64::try_from(advance).map_err(|_| too_fine)?;
        let unit = short.gcd(&n);
        let scale = u64::try_from(n / unit).map_err(|_| too_fine)?;
        let balance = match short {
            0 => None,
            _ => Some(Balance::new((n - short) / unit, short / unit).ok_or(too_fine)?),
        };
        Ok(Self {
            wanted: Wanted { ratio, phases },
            advance,
            balance,
            scale,
        })
    }

    /// The wanted long-run ratio, in lowest terms.
    pub fn wanted(&self) -> Exact {
        self.wanted.ratio
    }

    /// The phases of the table.
    pub fn phases(&self) -> u64 {
        self.wanted.phases
    }

    /// The two advances, phases for one output; equal if one is exact.
    pub fn advances(&self) -> (u64, u64) {
        (
            self.advance,
            self.advance + u64::from(self.balance.is_some()),
        )
    }

    /// The exact bound of |outputs made − outputs wanted| at any output, in output samples. It is reached.
    pub fn error_bound(&self) -> Exact {
        let units = self.balance.map_or(0, Balance::bound);
        // units/scale phases, each worth n/(D·L) outputs.
        Exact::new(
            u128::from(units) * self.unit_numerator(),
            self.wanted.ratio.denom() * u128::from(self.phases()),
        )
    }

    /// The proof that the two advances enclose the wanted ratio.
    pub fn certificate(&self) -> Certificate {
        Certificate::SteppingPair(SteppingPair {
            phases: self.phases(),
            advance: self.advance,
        })
    }

    /// The sequence from its start, error zero.
    pub fn start(self) -> SteppingState {
        SteppingState {
            stepping: self,
            error: 0,
        }
    }

    /// The sequence with an error carried over from what was served before, in output samples
    /// (made − wanted), rounded to the nearest unit of this stepping and brought within the bound at the
    /// fastest rate the advances allow. `None` if it is beyond 2^60 units, the arithmetic beyond 128 bits, or
    /// the advance exact, so that nothing would ever bring it back.
    pub fn start_from(self, error: Ratio<i128>) -> Option<SteppingState> {
        self.balance?;
        let scale = self.wanted.ratio.denom() * u128::from(self.phases());
        let error = rounded(-error, scale, self.unit_numerator())?;
        Some(SteppingState {
            stepping: self,
            error,
        })
    }

    /// One unit of error is as many outputs, over D·L: scale divides n.
    fn unit_numerator(&self) -> u128 {
        self.wanted.ratio.numer() / u128::from(self.scale)
    }
}

/// Where a stepping stands between two outputs. Plain data: copy it, save it, restore it.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct SteppingState {
    stepping: Stepping,
    /// Phases advanced − phases wanted, in units of the stepping.
    #[serde(deserialize_with = "crate::balance::saved_error")]
    error: i64,
}

impl SteppingState {
    /// The phases to advance for the next output, to be called once an output.
    ///
    /// # Examples
    /// The longer advance takes more input, so it makes the error fall:
    /// ```
    /// use ratewright_ratio::{Exact, Stepping};
    /// let mut state = Stepping::new(&Exact::new(101, 100), 64)?.start();
    /// let before = state.error_outputs();
    /// let advance = state.next_output();
    /// assert_eq!(advance == 64, state.error_outputs() < before);
    /// # Ok::<(), ratewright_ratio::SteppingError>(())
    /// ```
    #[inline]
    pub fn next_output(&mut self) -> u64 {
        let Some(balance) = self.stepping.balance else {
            return self.stepping.advance;
        };
        let up = balance.is_up(self.error);
        self.error = balance.after(self.error, up);
        self.stepping.advance + u64::from(up)
    }

    /// The stepping that is being served.
    pub fn stepping(&self) -> &Stepping {
        &self.stepping
    }

    /// Outputs made − outputs wanted so far, in output samples, exact.
    pub fn error_outputs(&self) -> Ratio<i128> {
        let d = *self.stepping.wanted.ratio.denom();
        let part = |x: u128| i128::try_from(x).expect("n is below 2^121 and phases·D below 2^124");
        let per_unit = part(self.stepping.unit_numerator());
        Ratio::new(
            -i128::from(self.error) * per_unit,
            part(d * u128::from(self.stepping.phases())),
        )
    }
}

impl TryFrom<Wanted> for Stepping {
    type Error = SteppingError;

    fn try_from(wanted: Wanted) -> Result<Self, SteppingError> {
        Self::new(&wanted.ratio, wanted.phases)
    }
}

impl From<Stepping> for Wanted {
    fn from(stepping: Stepping) -> Self {
        stepping.wanted
    }
}
