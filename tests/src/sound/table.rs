//! A polyphase filter over a table of phases: a sinc under a Kaiser window, whose values come from the
//! `windowfunctions` crate, [`TAPS`] of them for each of L phases.

use std::collections::BTreeMap;
use std::rc::Rc;

use ratewright_handle::Block;
use windowfunctions::{Symmetry, WindowFunction, window};

use super::position::Position;

/// Inputs that make an output.
pub const TAPS: usize = 96;

/// Kaiser's β for 150 dB of stop band: 0.1102 (A − 8.7).
const BETA: f32 = 15.57;

/// Half of the amplitude is passed at this share of the source's rate: at 44.1 kHz the pass band
/// ends at 19.8 kHz and the stop band begins at 24.3 kHz.
const CUTOFF: f64 = 0.5;

/// The L phases of a filter.
type Bank = Vec<[f64; TAPS]>;

/// Filters by their number of phases; resamplers share them.
#[derive(Debug, Default)]
pub struct Banks(BTreeMap<u64, Rc<Bank>>);

impl Banks {
    fn get(&mut self, l: u64) -> Rc<Bank> {
        Rc::clone(self.0.entry(l).or_insert_with(|| Rc::new(bank(l))))
    }
}

/// Prototype filter at L times the source's rate, dealt out to its phases, oldest input first.
fn bank(l: u64) -> Bank {
    let phases = l as usize;
    let length = phases * TAPS + 1;
    let kaiser = WindowFunction::Kaiser { beta: BETA };
    let window: Vec<f64> = window::<f64>(length, kaiser, Symmetry::Symmetric).collect();
    let middle = (phases * TAPS / 2) as f64;
    let prototype = |n: usize| {
        let inputs = (n as f64 - middle) / l as f64;
        sinc(2.0 * CUTOFF * inputs) * 2.0 * CUTOFF * window[n]
    };
    let taps = |phase: usize| {
        let mut taps = [0.0; TAPS];
        for (tap, value) in taps.iter_mut().enumerate() {
            *value = prototype(phase + (TAPS - 1 - tap) * phases);
        }
        taps
    };
    (0..phases).map(taps).collect()
}

fn sinc(x: f64) -> f64 {
    let angle = std::f64::consts::PI * x;
    if angle == 0.0 {
        1.0
    } else {
        libm::sin(angle) / angle
    }
}

/// One channel of sound under way through a table.
#[derive(Debug)]
pub struct Table {
    /// The newest inputs, oldest first, twice over so that a stretch of them is always in one piece.
    inputs: [f64; 2 * TAPS],
    oldest: usize,
    position: Position,
    bank: Rc<Bank>,
}

impl Table {
    /// Begins at a position, of an endless signal that `input` gives sample by sample. The filter
    /// reaches [`TAPS`]/2 inputs to either side.
    pub fn start(position: Position, banks: &mut Banks, input: impl Fn(i64) -> f64) -> Self {
        let mut table = Self {
            inputs: [0.0; 2 * TAPS],
            oldest: 0,
            position,
            bank: banks.get(position.l),
        };
        let newest = table.newest();
        for index in newest + 1 - TAPS as i64..=newest {
            table.take_in(input(index));
        }
        table
    }

    /// The newest input that an output at the present position needs.
    fn newest(&self) -> i64 {
        self.position.index as i64 + TAPS as i64 / 2
    }

    fn take_in(&mut self, sample: f64) {
        self.inputs[self.oldest] = sample;
        self.inputs[self.oldest + TAPS] = sample;
        self.oldest = (self.oldest + 1) % TAPS;
    }

    /// Makes the outputs of a block, at its own L/M from the very first.
    pub fn run(
        &mut self,
        block: &Block,
        banks: &mut Banks,
        input: impl Fn(i64) -> f64,
        output: &mut Vec<f64>,
    ) {
        if self.position.l != block.l {
            self.bank = banks.get(block.l);
            self.position = self.position.moved(block, 0);
        }
        for _ in 0..block.outputs {
            output.push(self.output());
            let from = self.newest();
            self.position = self.position.after_output(block);
            for index in from + 1..=self.newest() {
                self.take_in(input(index));
            }
        }
    }

    fn output(&self) -> f64 {
        let inputs = &self.inputs[self.oldest..self.oldest + TAPS];
        let taps = &self.bank[self.position.phase as usize];
        inputs.iter().zip(taps).map(|(x, h)| x * h).sum()
    }
}
