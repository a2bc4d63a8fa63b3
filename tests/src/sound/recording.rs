//! Sound, where it is made: counting goes on for hours, but tones are resampled only in stretches.
//!
//! A tone of a steady frequency in house time, sampled by the source's clock, is known at any time
//! without having been made from the beginning; a stretch that begins later is the same, sample by
//! sample, as if it had been. While the stream runs the tape keeps the very blocks that the handle
//! gave, with the exact position of the first; the filter runs over them when the stream has ended,
//! so that it takes no time from those who report and play.

use std::f64::consts::TAU;

use ratewright_handle::Block;

use super::position::Position;
use super::resampler::{Filter, Resampler};
use super::table::Banks;
use super::world::{Instant, World};

/// Outputs at the beginning of a recording whose instants are kept: enough for a phase.
pub const PHASE_OUTPUTS: usize = 1 << 13;

/// The FIFO's level at the start, samples: what is made first is played so much later.
const CENTRE_SAMPLES: f64 = 2.0;

/// A stretch to be recorded.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Stretch {
    /// The output with which it begins, or the first block after.
    pub from_output: u64,
    /// How many outputs.
    pub outputs: usize,
}

/// What was recorded.
#[derive(Debug)]
pub struct Recording {
    /// The first output.
    pub first_output: u64,
    /// Changes of L/M within it.
    pub switches: u64,
    /// Instants at which the sink plays the first [`PHASE_OUTPUTS`], or all if they are fewer.
    pub played: Vec<Instant>,
    /// The tones' frequencies, Hz, with what came of each.
    pub tones: Vec<(f64, Vec<f64>)>,
}

/// The blocks of a stretch.
#[derive(Debug)]
struct Cut {
    stretch: Stretch,
    first_output: u64,
    position: Position,
    /// Outputs of the blocks.
    outputs: u64,
    blocks: Vec<Block>,
}

/// Records tones in stretches.
#[derive(Debug)]
pub struct Tape {
    filter: Filter,
    tones_hz: Vec<f64>,
    /// Latest first.
    stretches: Vec<Stretch>,
    running: Option<Cut>,
    done: Vec<Cut>,
}

impl Tape {
    /// A tape for tones, each a multiple of 10 Hz, and stretches in their order.
    pub fn new(filter: Filter, tones_hz: &[f64], stretches: &[Stretch]) -> Self {
        Self {
            filter,
            tones_hz: tones_hz.to_vec(),
            stretches: stretches.iter().rev().copied().collect(),
            running: None,
            done: Vec::new(),
        }
    }

    /// A block was made, beginning with output number `made` at a position.
    #[inline]
    pub fn record(&mut self, made: u64, position: Position, block: &Block) {
        let is_due = |next: &Stretch| made >= next.from_output;
        if self.running.is_none() {
            let due = self.stretches.pop_if(|next| is_due(next));
            self.running = due.map(|stretch| Cut {
                stretch,
                first_output: made,
                position,
                outputs: 0,
                blocks: Vec::new(),
            });
        }
        if let Some(mut cut) = self.running.take() {
            cut.outputs += block.outputs;
            cut.blocks.push(*block);
            if cut.outputs >= cut.stretch.outputs as u64 {
                self.done.push(cut);
            } else {
                self.running = Some(cut);
            }
        }
    }

    /// The recordings that are whole, of a stream whose first output met the sink at position
    /// `start`.
    pub fn finish(self, world: &World, start: f64) -> Vec<Recording> {
        let mut banks = Banks::default();
        let mut recording = |cut: Cut| {
            let mut sound = |&hz: &f64| (hz, cut.sound(world, hz, self.filter, &mut banks));
            Recording {
                first_output: cut.first_output,
                switches: cut.switches(),
                played: cut.played(world, start),
                tones: self.tones_hz.iter().map(&mut sound).collect(),
            }
        };
        self.done.into_iter().map(&mut recording).collect()
    }
}

impl Cut {
    /// What comes of a tone.
    fn sound(&self, world: &World, hz: f64, filter: Filter, banks: &mut Banks) -> Vec<f64> {
        let input = |index: i64| sample(world, hz, index);
        let mut outputs = Vec::with_capacity(self.outputs as usize);
        let mut resampler = Resampler::start(filter, self.position, banks, input);
        for block in &self.blocks {
            resampler.run(block, banks, input, &mut outputs);
        }
        outputs.truncate(self.stretch.outputs);
        outputs
    }

    fn switches(&self) -> u64 {
        let ratio = |block: &Block| (block.l, block.m);
        let pairs = self.blocks.windows(2);
        pairs
            .filter(|pair| ratio(&pair[0]) != ratio(&pair[1]))
            .count() as u64
    }

    /// Instants at which the sink plays the first outputs.
    fn played(&self, world: &World, start: f64) -> Vec<Instant> {
        let first = start + CENTRE_SAMPLES + self.first_output as f64;
        let outputs = self.stretch.outputs.min(PHASE_OUTPUTS);
        (0..outputs)
            .map(|n| world.sink.when(first + n as f64))
            .collect()
    }
}

/// The source's sample: the tone at the instant of that tick of the source's clock.
fn sample(world: &World, hz: f64, index: i64) -> f64 {
    libm::sin(TAU * world.source.when(index as f64).turns(hz))
}
