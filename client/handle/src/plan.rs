//! What is to be run, as words: the sequence is worked out anew on the other side, in exact
//! integers, by a bounded number of steps and without allocation.

use ratewright_ratio::{Cadence, Exact, Fraction, Lazy, Stepping, target_from_f64};

use crate::{ArmError, Realised};

/// Words of a [`Plan`].
pub(crate) const PLAN_WORDS: usize = 10;

const NOTHING: u64 = 0;
const SINGLE: u64 = 1;
const CADENCE: u64 = 2;
const STEPPING: u64 = 3;
const LAZY: u64 = 4;

/// A [`Realised`] as words: its kind, the wanted ratio in four, the two ratios in four, and the
/// phases or the bits of the swing.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub(crate) struct Plan(pub(crate) [u64; PLAN_WORDS]);

impl Plan {
    /// # Errors
    /// [`ArmError`] for a swing that the pair cannot keep, so that [`Plan::realised`] never fails
    /// on what was made here.
    pub(crate) fn new(realised: &Realised) -> Result<Self, ArmError> {
        let none = Fraction::new_raw(0, 0);
        let (kind, low, high, last) = match realised {
            Realised::Single(ratio) => (SINGLE, *ratio, none, 0),
            Realised::Cadence(cadence) => (CADENCE, cadence.low(), cadence.high(), 0),
            Realised::Stepping(stepping) => (STEPPING, none, none, stepping.phases()),
            Realised::Lazy {
                cadence,
                swing_samples,
            } => {
                lazy(*cadence, *swing_samples)?;
                (LAZY, cadence.low(), cadence.high(), swing_samples.to_bits())
            }
        };
        let wanted = realised.average();
        let [numer, more_numer] = halves(*wanted.numer());
        let [denom, more_denom] = halves(*wanted.denom());
        let (low, high) = ([*low.numer(), *low.denom()], [*high.numer(), *high.denom()]);
        Ok(Self([
            kind, numer, more_numer, denom, more_denom, low[0], low[1], high[0], high[1], last,
        ]))
    }

    /// True if there is nothing here.
    pub(crate) fn is_empty(&self) -> bool {
        self.0[0] == NOTHING
    }

    /// What these words were made of; `None` only for words that [`Plan::new`] never makes.
    pub(crate) fn realised(&self) -> Option<Realised> {
        let [
            kind,
            numer,
            more_numer,
            denom,
            more_denom,
            low_l,
            low_m,
            high_l,
            high_m,
            last,
        ] = self.0;
        let wanted = Exact::new_raw(whole(numer, more_numer), whole(denom, more_denom));
        let low = Fraction::new_raw(low_l, low_m);
        let cadence = || {
            let high = Fraction::new_raw(high_l, high_m);
            Cadence::of_pair(&wanted, low, high).ok()
        };
        match kind {
            SINGLE => Some(Realised::Single(low)),
            CADENCE => cadence().map(Realised::Cadence),
            STEPPING => Stepping::new(&wanted, last).ok().map(Realised::Stepping),
            LAZY => cadence().map(|cadence| Realised::Lazy {
                cadence,
                swing_samples: f64::from_bits(last),
            }),
            _ => None,
        }
    }
}

/// The lazy form of a pair, at its start.
pub(crate) fn lazy(cadence: Cadence, swing_samples: f64) -> Result<Lazy, ArmError> {
    let swing = target_from_f64(swing_samples).map_err(ArmError::Swing)?;
    Lazy::new(cadence, &swing).map_err(|error| ArmError::swing(swing_samples, error))
}

fn halves(x: u128) -> [u64; 2] {
    [x as u64, (x >> 64) as u64]
}

fn whole(low: u64, high: u64) -> u128 {
    u128::from(low) | u128::from(high) << 64
}

#[cfg(all(test, not(loom)))]
mod tests {
    use super::*;
    use ratewright_ratio::Bounds;

    #[test]
    fn words_give_back_what_they_were_made_of() {
        let bounds = Bounds::new(256, 256).expect("in range");
        // Parts of more than 64 bits, and yet a period of fewer than 2^60 blocks.
        let denominator = (1 << 66) + 1;
        let wanted = Exact::new(denominator / 255 * 256 - 7, denominator);
        let (low, high) = (Fraction::new(1, 1), Fraction::new(256, 255));
        let wide = Cadence::of_pair(&wanted, low, high).expect("between");
        let cadence = Cadence::new(&Exact::new(160_003, 147_000), &bounds).expect("between");
        let stepping = Stepping::new(&Exact::new(160_003, 147_000), 512).expect("enough");
        for realised in [
            Realised::Single(Fraction::new(160, 147)),
            Realised::Cadence(cadence),
            Realised::Cadence(wide),
            Realised::Stepping(stepping),
            Realised::Lazy {
                cadence,
                swing_samples: 2.25,
            },
        ] {
            let plan = Plan::new(&realised).expect("a good one");
            assert!(!plan.is_empty());
            assert_eq!(plan.realised(), Some(realised));
        }
        assert!(Plan::default().is_empty() && Plan::default().realised().is_none());
    }

    #[test]
    fn a_swing_that_cannot_be_kept_is_refused() {
        let bounds = Bounds::new(256, 256).expect("in range");
        let cadence = Cadence::new(&Exact::new(160_003, 147_000), &bounds).expect("between");
        for (swing_samples, why) in [(1e-4, "error bound"), (f64::NAN, "swing_samples: ")] {
            let lazy = Realised::Lazy {
                cadence,
                swing_samples,
            };
            let error = Plan::new(&lazy).expect_err("too small").to_string();
            assert!(error.contains(why), "{error}");
        }
    }
}
