//! The resampler of the `speexdsp-resampler` crate, driven block by block.

use std::fmt;

use ratewright_handle::Block;
use speexdsp_resampler::State;

use super::position::Position;

/// The best there is: 256 taps, and a table of 32 phases between which it interpolates by cubics.
const QUALITY: usize = 10;

/// One channel of sound under way through the crate's resampler.
pub struct Speex {
    state: State,
    /// L and M that run.
    ratio: (u64, u64),
    /// Whole inputs passed.
    index: i64,
    /// Inputs that the filter reaches to either side.
    reach: i64,
    /// Inputs given to the crate but not yet taken, of which the next to come is `next_input`.
    waiting: Vec<f32>,
    next_input: i64,
    made: Vec<f32>,
}

impl fmt::Debug for Speex {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let mut speex = f.debug_struct("Speex");
        speex
            .field("ratio", &self.ratio)
            .field("index", &self.index);
        speex.finish_non_exhaustive()
    }
}

impl Speex {
    /// Begins at an input, of an endless signal that `input` gives sample by sample.
    ///
    /// # Panics
    /// At a phase between two inputs: the crate can't be told one.
    pub fn start(position: Position, input: impl Fn(i64) -> f64) -> Self {
        assert_eq!(position.phase, 0, "the crate begins at an input");
        let mut state = State::new(1, 1, 1, QUALITY).expect("one channel at one to one");
        let reach = state.get_input_latency() as i64;
        let index = position.index.cast_signed();
        // One to one until the filter is full: the next output is that at `index`.
        let before: Vec<f32> = (index - reach..index + reach)
            .map(|i| input(i) as f32)
            .collect();
        let mut filling = vec![0.0; before.len()];
        let moved = state.process_float(0, &before, &mut filling);
        assert_eq!(moved.ok(), Some((before.len(), before.len())));
        Self {
            state,
            ratio: (1, 1),
            index,
            reach,
            waiting: Vec::new(),
            next_input: index + reach,
            made: Vec::new(),
        }
    }

    /// Makes the outputs of a whole block, at its own L/M from the very first: the phase is 0 there,
    /// which the crate carries over to another L without rounding.
    ///
    /// # Panics
    /// If the block does not end at an input, or samples down, in which case the crate would change
    /// the length of its filter.
    pub fn run(&mut self, block: &Block, input: impl Fn(i64) -> f64, output: &mut Vec<f64>) {
        assert!(block.l >= block.m, "{block:?} samples down");
        let phases = block.outputs * block.m;
        assert_eq!(phases % block.l, 0, "{block:?} ends between two inputs");
        if self.ratio != (block.l, block.m) {
            self.ratio = (block.l, block.m);
            let set = self.state.set_rate(block.m as usize, block.l as usize);
            set.expect("neither is 0, and a phase of 0 does not overflow");
        }
        self.index += (phases / block.l).cast_signed();
        while self.next_input <= self.index + self.reach {
            self.waiting.push(input(self.next_input) as f32);
            self.next_input += 1;
        }
        self.made.resize(block.outputs as usize, 0.0);
        let moved = self.state.process_float(0, &self.waiting, &mut self.made);
        let (taken, made) = moved.expect("the filter is there");
        assert_eq!(made, self.made.len(), "all inputs were there");
        self.waiting.drain(..taken);
        output.extend(self.made.iter().map(|&sample| f64::from(sample)));
    }
}
