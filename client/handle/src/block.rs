//! The sequence that is running, block by block.

use num_rational::Ratio;
use ratewright_ratio::{CadenceState, Fraction, Lazy, SteppingState};

use crate::Realised;
use crate::plan::lazy;

/// The carried error is kept in units of 2^-48 output samples: 10^9 changes round away less than
/// 2·10^-6 of a sample.
const FINE: i128 = 1 << 48;

/// What to run next: `outputs` outputs, each `m` phases of `l` after the one before.
///
/// Of a ratio that is a whole block: L outputs of M inputs. Of a stepping it is one output: `l` is
/// the table's number of phases and `m` the advance.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Block {
    /// Interpolation factor: phases of the filter.
    pub l: u64,
    /// Phases to advance for each output.
    pub m: u64,
    /// Outputs to make before the next call.
    pub outputs: u64,
}

impl Block {
    #[inline]
    fn whole(ratio: Fraction) -> Self {
        let (l, m) = (*ratio.numer(), *ratio.denom());
        Self { l, m, outputs: l }
    }
}

/// What is running, with its error.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Running {
    sequence: Sequence,
    /// What rounding left out when the error was carried into the sequence, outputs made − wanted.
    left_out: i128,
}

#[derive(Clone, Copy, Debug)]
enum Sequence {
    Single(Fraction),
    Cadence(CadenceState),
    Stepping(SteppingState),
    Lazy(Lazy, f64),
}

impl Running {
    /// From error zero.
    pub(crate) fn start(realised: &Realised) -> Self {
        Self {
            sequence: Sequence::from_error(realised, Ratio::from_integer(0)),
            left_out: 0,
        }
    }

    /// The next block.
    #[inline(always)]
    pub(crate) fn next_block(&mut self) -> Block {
        match &mut self.sequence {
            Sequence::Cadence(state) => Block::whole(state.next_block()),
            Sequence::Single(ratio) => Block::whole(*ratio),
            Sequence::Lazy(state, _) => Block::whole(state.next_block()),
            Sequence::Stepping(state) => Block {
                l: state.stepping().phases(),
                m: state.next_output(),
                outputs: 1,
            },
        }
    }

    /// Goes over to something else at a block end, and carries the error along. The same again
    /// just goes on.
    pub(crate) fn change_to(&mut self, realised: &Realised) {
        if self.runs(realised) {
            return;
        }
        let error = self.fine_error();
        self.sequence = Sequence::from_error(realised, Ratio::new(error, FINE));
        self.left_out = error - self.sequence.fine_error();
    }

    fn runs(&self, realised: &Realised) -> bool {
        match (&self.sequence, realised) {
            (Sequence::Single(ratio), Realised::Single(other)) => ratio == other,
            (Sequence::Cadence(state), Realised::Cadence(cadence)) => state.cadence() == cadence,
            (Sequence::Stepping(state), Realised::Stepping(other)) => state.stepping() == other,
            (
                Sequence::Lazy(state, swing),
                Realised::Lazy {
                    cadence,
                    swing_samples,
                },
            ) => state.cadence() == cadence && swing == swing_samples,
            _ => false,
        }
    }

    /// Outputs made − outputs wanted since the start, over all changes, in units of 1/[`FINE`]. The
    /// error of a single ratio that is not the wanted one is no part of it: it is meant.
    pub(crate) fn fine_error(&self) -> i128 {
        self.left_out + self.sequence.fine_error()
    }
}

impl Sequence {
    /// The sequence from an error, as near to it as its unit allows, and from zero if it cannot
    /// take one up.
    fn from_error(realised: &Realised, error: Ratio<i128>) -> Self {
        match realised {
            Realised::Single(ratio) => Self::Single(*ratio),
            Realised::Cadence(cadence) => {
                Self::Cadence(cadence.start_from(error).unwrap_or(cadence.start()))
            }
            Realised::Stepping(stepping) => {
                Self::Stepping(stepping.start_from(error).unwrap_or(stepping.start()))
            }
            Realised::Lazy {
                cadence,
                swing_samples,
            } => match lazy(*cadence, *swing_samples) {
                Ok(lazy) => Self::Lazy(lazy.start_from(error).unwrap_or(lazy), *swing_samples),
                // Never armed; the same pair in turn keeps a smaller error still.
                Err(_) => Self::Cadence(cadence.start_from(error).unwrap_or(cadence.start())),
            },
        }
    }

    fn fine_error(&self) -> i128 {
        let error = match self {
            Self::Single(_) => return 0,
            Self::Cadence(state) => state.error_outputs(),
            Self::Stepping(state) => state.error_outputs(),
            Self::Lazy(state, _) => state.error_outputs(),
        };
        fine(error)
    }
}

/// An error in units of 1/[`FINE`], rounded; the whole part by itself, so that nothing overflows.
fn fine(error: Ratio<i128>) -> i128 {
    let (n, mut d) = (*error.numer(), *error.denom());
    let whole = n.div_euclid(d);
    let mut rest = n.rem_euclid(d);
    // Denominators beyond 2^78 lose bits that are far below the unit.
    let surplus = (i128::BITS - d.leading_zeros()).saturating_sub(78);
    (rest, d) = (rest >> surplus, d >> surplus);
    whole * FINE + (rest * FINE + d / 2) / d
}

#[cfg(all(test, not(loom)))]
mod tests {
    use super::*;
    use ratewright_ratio::{Bounds, Cadence, Exact, Stepping};

    fn unity() -> Running {
        Running::start(&Realised::Single(Fraction::new(1, 1)))
    }

    fn outputs_and_inputs(running: &mut Running, blocks: usize) -> (i128, Ratio<i128>) {
        let (mut outputs, mut inputs) = (0, Ratio::from_integer(0));
        for _ in 0..blocks {
            let block = running.next_block();
            outputs += i128::from(block.outputs);
            inputs += Ratio::new(
                i128::from(block.outputs) * i128::from(block.m),
                i128::from(block.l),
            );
        }
        (outputs, inputs)
    }

    #[test]
    fn ten_thousand_changes_leave_no_more_than_the_bound_of_the_last() {
        let bounds = Bounds::new(64, 64).expect("in range");
        let mut running = unity();
        let mut error = Ratio::from_integer(0i128);
        let mut seed = 1u64;
        for change in 0..10_000u32 {
            seed = seed
                .wrapping_mul(6_364_136_223_846_793_005)
                .wrapping_add(99);
            let wanted = Exact::new(1_000_000 + u128::from(seed >> 54), 1_000_003);
            let Ok(cadence) = Cadence::new(&wanted, &bounds) else {
                continue;
            };
            let realised = match change % 3 {
                0 => Realised::Cadence(cadence),
                1 => Realised::Lazy {
                    cadence,
                    swing_samples: 1.5,
                },
                _ => Realised::Stepping(Stepping::new(&wanted, 64).expect("enough phases")),
            };
            running.change_to(&realised);
            let blocks = (seed >> 40) as usize % 50;
            let (outputs, inputs) = outputs_and_inputs(&mut running, blocks);
            let wanted = Ratio::new(*wanted.numer() as i128, *wanted.denom() as i128);
            error += Ratio::from_integer(outputs) - wanted * inputs;
            let told = Ratio::new(running.fine_error(), FINE);
            let off = error - told;
            assert!(
                off < Ratio::new(1, 1 << 30) && off > Ratio::new(-1, 1 << 30),
                "{change}: {error} {told}"
            );
            // Keep the exact error's denominator from growing without end.
            error = told;
        }
        // The swing of the lazy pairs, which the others work off.
        let bound = Ratio::new(3, 2);
        assert!(error <= bound && error >= -bound, "{error}");
    }

    #[test]
    fn the_same_again_goes_on_where_it_was() {
        let bounds = Bounds::new(64, 64).expect("in range");
        let cadence = Cadence::new(&Exact::new(1_000_037, 1_000_000), &bounds).expect("between");
        let realised = Realised::Cadence(cadence);
        let (mut renewed, mut plain) = (unity(), unity());
        plain.change_to(&realised);
        for _ in 0..1_000 {
            renewed.change_to(&realised);
            assert_eq!(renewed.next_block(), plain.next_block());
        }
    }

    #[test]
    fn a_single_ratio_keeps_the_error_for_the_next_pair() {
        let bounds = Bounds::new(8, 8).expect("in range");
        let cadence = Cadence::new(&Exact::new(100_003, 100_000), &bounds).expect("between");
        let mut running = unity();
        running.change_to(&Realised::Cadence(cadence));
        while running.fine_error() < FINE / 20 {
            running.next_block();
        }
        let error = running.fine_error();
        running.change_to(&Realised::Single(Fraction::new(1, 1)));
        running.next_block();
        assert_eq!(running.fine_error(), error);
        running.change_to(&Realised::Cadence(cadence));
        assert!((running.fine_error() - error).abs() <= 1);
    }

    #[test]
    fn fine_rounds_and_never_overflows() {
        assert_eq!(fine(Ratio::new(-1, 4)), -FINE / 4);
        assert_eq!(fine(Ratio::new(1 << 40, 3)), ((FINE << 40) * 2 + 3) / 6);
        let narrow = Ratio::new_raw((1 << 120) + 1, 1 << 121);
        assert_eq!(fine(narrow), FINE / 2);
    }
}
