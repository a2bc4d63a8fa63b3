//! Keeping a buffer near its centre when nobody sends settings any more.

use ratewright_ratio::{Cadence, Exact, Stepping};
use thiserror::Error;

use crate::Realised;

/// Within this time a level is brought to 1/e of itself, if the limit allows.
const RECOVERY_S: f64 = 60.0;

/// How far a follower may depart from the long-run average by its own buffer's level, past expiry.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Trim {
    limit_ppb: f64,
}

/// Why there is no such trim.
#[derive(Clone, Copy, Debug, PartialEq, Error)]
pub enum TrimError {
    /// A limit that is none, or that would be heard.
    #[error("limit_ppm is {0}; accepted is above 0, at most 1000")]
    Limit(f64),
    /// A single ratio has nothing to be trimmed with.
    #[error("a single ratio cannot be trimmed")]
    Single,
    /// Nothing was armed.
    #[error("there is no setting to trim")]
    NoSetting,
    /// The pair does not reach so far.
    #[error("a trim of {ppb} ppb is more than the two ratios, or the advances, can make")]
    OutOfReach {
        /// The refused trim.
        ppb: i64,
    },
}

impl Trim {
    /// A trim of at most `limit_ppm` parts per million either way: above 0, at most 1000. (A change
    /// of pitch of 1000 ppm is 1.7 cents.)
    ///
    /// # Errors
    /// [`TrimError::Limit`].
    pub fn new(limit_ppm: f64) -> Result<Self, TrimError> {
        if limit_ppm > 0.0 && limit_ppm <= 1000.0 {
            let limit_ppb = limit_ppm * 1e3;
            Ok(Self { limit_ppb })
        } else {
            Err(TrimError::Limit(limit_ppm))
        }
    }

    /// By how much to change the average for a level in sink samples at a sink of `rate_hz`, in parts
    /// per billion: towards the centre within a minute, as far as the limit allows. 0 for a level
    /// that is no number.
    ///
    /// # Examples
    /// A buffer that is too full asks for fewer outputs:
    /// ```
    /// use ratewright_handle::Trim;
    /// let trim = Trim::new(5.0)?;
    /// // 4.8 samples in 60 s at 48 kHz.
    /// assert_eq!(trim.ppb(4.8, 48_000.0), -1_667);
    /// assert_eq!(trim.ppb(-1e6, 48_000.0), 5_000);
    /// # Ok::<(), ratewright_handle::TrimError>(())
    /// ```
    pub fn ppb(&self, level_samples: f64, rate_hz: f64) -> i64 {
        let wanted = -level_samples / (RECOVERY_S * rate_hz) * 1e9;
        // NaN becomes 0.
        wanted.clamp(-self.limit_ppb, self.limit_ppb).round() as i64
    }
}

/// The same pair or table with another average: that of `realised` times 1 + `ppb`/10^9.
pub(crate) fn trimmed(realised: &Realised, ppb: i64) -> Result<Realised, TrimError> {
    let out_of_reach = TrimError::OutOfReach { ppb };
    let numer = 1_000_000_000i64
        .checked_add(ppb)
        .and_then(|numer| u128::try_from(numer).ok());
    let factor = Exact::new(numer.ok_or(out_of_reach)?, 1_000_000_000);
    let average = realised.average();
    let parts = |x: u128, y: u128| x.checked_mul(y).ok_or(out_of_reach);
    let wanted = Exact::new(
        parts(*average.numer(), *factor.numer())?,
        parts(*average.denom(), *factor.denom())?,
    );
    let pair = |cadence: &Cadence| {
        Cadence::of_pair(&wanted, cadence.low(), cadence.high()).map_err(|_| out_of_reach)
    };
    match realised {
        Realised::Single(_) => Err(TrimError::Single),
        Realised::Cadence(cadence) => pair(cadence).map(Realised::Cadence),
        Realised::Lazy {
            cadence,
            swing_samples,
        } => pair(cadence).map(|cadence| Realised::Lazy {
            cadence,
            swing_samples: *swing_samples,
        }),
        Realised::Stepping(stepping) => Stepping::new(&wanted, stepping.phases())
            .map(Realised::Stepping)
            .map_err(|_| out_of_reach),
    }
}

#[cfg(all(test, not(loom)))]
mod tests {
    use super::*;
    use ratewright_ratio::{Bounds, Fraction, residual};

    #[test]
    fn the_average_moves_by_what_was_asked_for() {
        let bounds = Bounds::new(256, 256).expect("in range");
        let wanted = Exact::new(10_000_371, 10_000_000);
        let cadence = Cadence::new(&wanted, &bounds).expect("between");
        let stepping = Stepping::new(&wanted, 512).expect("enough phases");
        for realised in [
            Realised::Cadence(cadence),
            Realised::Lazy {
                cadence,
                swing_samples: 3.0,
            },
            Realised::Stepping(stepping),
        ] {
            for ppb in [-20_000, -1, 0, 7_500] {
                let average = trimmed(&realised, ppb).expect("in reach").average();
                let asked = *average.numer() as f64 / *average.denom() as f64;
                let plain = *wanted.numer() as f64 / *wanted.denom() as f64;
                assert!(((asked / plain - 1.0) * 1e9 - ppb as f64).abs() < 1e-3);
            }
        }
        let nearer = residual(&cadence.low(), &wanted).abs() * 1e9;
        let beyond = trimmed(&Realised::Cadence(cadence), -(nearer as i64) - 10);
        assert!(
            matches!(beyond, Err(TrimError::OutOfReach { .. })),
            "{beyond:?}"
        );
        let single = trimmed(&Realised::Single(Fraction::new(1, 1)), 5);
        assert_eq!(single, Err(TrimError::Single));
    }

    #[test]
    fn a_limit_that_would_be_heard_is_refused() {
        for limit in [0.0, -1.0, 1000.1, f64::NAN, f64::INFINITY] {
            assert!(Trim::new(limit).is_err(), "{limit}");
        }
        let trim = Trim::new(100.0).expect("in range");
        assert_eq!(trim.ppb(f64::NAN, 48_000.0), 0);
    }
}
