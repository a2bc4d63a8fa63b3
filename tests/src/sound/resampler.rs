//! Resamplers that change their L/M at a chosen sample.
//!
//! Four resampling crates of the registry were read for whether an exact L/M can be switched at a
//! chosen sample:
//!
//! - `speexdsp-resampler` 0.1 counts its position in whole inputs and L-ths of one, and takes two
//!   integer rates anew between any two outputs. A phase of 0, as at the end of a block of L outputs,
//!   is carried over exactly: cadences and lazy switching run on it. It reduces the fraction, and
//!   rounds any other phase when L changes: a table of L phases cannot be stepped through.
//! - `rubato` 5.1 fixes two integer rates for good, or takes a ratio as a double from the start of its
//!   next chunk on.
//! - `samplerate` 0.2 takes two integer rates anew with any call, but makes a double of them.
//! - `dasp_signal` 0.11 takes a ratio anew with any sample, as a double, and adds it up as one.
//!
//! So steppings run on a polyphase filter of ours ([`super::table`]), which cadences and lazy
//! switching also can: a test compares the two.

use ratewright_handle::Block;

use super::position::Position;
use super::speex::Speex;
use super::table::{Banks, Table};

/// What to resample with.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Filter {
    /// `speexdsp-resampler`: whole blocks.
    Speex,
    /// A table of phases: anything.
    Table,
}

/// One channel of sound under way.
#[derive(Debug)]
pub enum Resampler {
    /// See [`Filter::Speex`].
    Speex(Box<Speex>),
    /// See [`Filter::Table`].
    Table(Box<Table>),
}

impl Resampler {
    /// Begins at a position, of an endless signal that `input` gives sample by sample.
    ///
    /// # Panics
    /// As [`Speex::start`].
    pub fn start(
        filter: Filter,
        position: Position,
        banks: &mut Banks,
        input: impl Fn(i64) -> f64,
    ) -> Self {
        match filter {
            Filter::Speex => Self::Speex(Box::new(Speex::start(position, input))),
            Filter::Table => Self::Table(Box::new(Table::start(position, banks, input))),
        }
    }

    /// Makes the outputs of a block, at its own L/M from the very first.
    ///
    /// # Panics
    /// As [`Speex::run`] and [`Position::after_block`].
    pub fn run(
        &mut self,
        block: &Block,
        banks: &mut Banks,
        input: impl Fn(i64) -> f64,
        output: &mut Vec<f64>,
    ) {
        match self {
            Self::Speex(speex) => speex.run(block, input, output),
            Self::Table(table) => table.run(block, banks, input, output),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// The signal that was sampled, at the position of each output: across changes of L/M at every
    /// block end it must go on as if there were none. An output too many or too few at either ratio
    /// would be a phase of a degree or more: 0.02 of the amplitude.
    #[track_caller]
    fn lies_on_the_signal(filter: Filter, hz: f64, within: f64) {
        let signal = |t: f64| libm::sin(std::f64::consts::TAU * hz * t / 44_100.0 + 0.4);
        let input = |i: i64| signal(i as f64);
        let mut banks = Banks::default();
        let mut position = Position::at(1_000);
        let mut resampler = Resampler::start(filter, position, &mut banks, input);
        let mut worst: f64 = 0.0;
        for (l, m) in [
            (160, 147),
            (159, 146),
            (1_023, 940),
            (3, 2),
            (160, 147),
            (1, 1),
            (948, 871),
            (197, 181),
        ] {
            let block = Block { l, m, outputs: l };
            let mut outputs = Vec::new();
            resampler.run(&block, &mut banks, input, &mut outputs);
            assert_eq!(outputs.len() as u64, l);
            for output in outputs {
                worst = worst.max((output - signal(position.inputs())).abs());
                position = position.after_output(&block);
            }
            assert_eq!(position.phase, 0);
        }
        assert!(worst < within, "{filter:?}, {hz} Hz: off by {worst}");
    }

    #[test]
    fn a_table_makes_outputs_on_the_signal_whatever_the_ratio() {
        lies_on_the_signal(Filter::Table, 1_000.0, 1e-7);
        lies_on_the_signal(Filter::Table, 19_000.0, 1e-7);
    }

    /// The crate's own accuracy, single precision and interpolation, is all that is between.
    #[test]
    fn the_crate_makes_outputs_on_the_signal_whatever_the_ratio() {
        lies_on_the_signal(Filter::Speex, 1_000.0, 3e-5);
        lies_on_the_signal(Filter::Speex, 19_000.0, 3e-5);
    }
}
