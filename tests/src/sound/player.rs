//! A player: takes what the source delivers, resamples it as its handle says, and feeds the sink
//! through a FIFO. Every sample is counted; sound is made only where it is recorded.

use ratewright_handle::{
    ArmError, Block, Cue, Reader, SettingNumber, Timescale, TimescaleError, Writer, handle,
};
use thiserror::Error;

use super::position::Position;
use super::recording::{Recording, Tape};
use super::world::{SLOT_NS, World};

/// House time between two timescales, in slots.
const TIMESCALE_SLOTS: usize = 10;

/// What went wrong in a player: a fault of this program.
#[derive(Debug, Error)]
pub enum PlayerError {
    /// A setting.
    #[error("a setting could not be armed: {0}")]
    Arm(#[from] ArmError),
    /// A timescale.
    #[error("a timescale was refused: {0}")]
    Timescale(#[from] TimescaleError),
}

/// How a setting took effect.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Change {
    /// Which.
    pub number: SettingNumber,
    /// Block end at which it took effect, sink samples.
    pub at: u64,
    /// The block end before, sink samples.
    pub before: u64,
    /// What was said of it: house time of the block end, ns.
    pub said_ns: i64,
}

/// Least and most of something.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Range<T> {
    /// Least.
    pub least: T,
    /// Most.
    pub most: T,
}

impl<T: PartialOrd + Copy> Range<T> {
    fn of(value: T) -> Self {
        let (least, most) = (value, value);
        Self { least, most }
    }

    fn take_in(&mut self, value: T) {
        if value < self.least {
            self.least = value;
        }
        if value > self.most {
            self.most = value;
        }
    }
}

/// The phase error in a slot.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct SlotPhase {
    /// Beginning of the slot, ns since the origin.
    pub at_ns: i64,
    /// Phase error, sink samples.
    pub phase: Range<f64>,
}

/// A player in a world.
#[derive(Debug)]
pub struct Player {
    writer: Writer,
    reader: Reader,
    position: Position,
    block: Block,
    /// Slot up to whose beginning it has played.
    slot: usize,
    /// Outputs made; those of the running block count when it ends.
    made: u64,
    /// Sink's position at the start.
    start: f64,
    sink_sample: u64,
    seen: Option<SettingNumber>,
    /// Phase error in whole and parts of samples, over all block ends.
    phase: Range<f64>,
    /// Outputs made minus whole samples taken.
    fifo: Range<i64>,
    slots: Vec<SlotPhase>,
    changes: Vec<Change>,
    /// Changes that were told.
    told: usize,
    tape: Tape,
}

impl Player {
    /// Starts with a first setting, at the first whole source sample at or after its instant. The
    /// FIFO is at its centre then. The world must be known for a slot more.
    ///
    /// # Errors
    /// [`PlayerError`].
    pub fn start(world: &World, first: &Cue, tape: Tape) -> Result<Self, PlayerError> {
        let (mut writer, mut reader) = handle(&first.realised)?;
        let begun = world.source.at_ns(first.effect_ns - world.origin_ns).ceil();
        let at = world.source.when(begun);
        let start = world.sink.at_slot(at.slot)
            + world.sink.in_slot(at.slot) * at.into_s / (SLOT_NS as f64 * 1e-9);
        writer.arm(first)?;
        writer.set_timescale(&timescale(world, at.slot))?;
        let sink_sample = start as u64;
        // The instant may fall between two sink samples, of which the timescale knows the later.
        let block = reader.next_block(sink_sample + 1);
        Ok(Self {
            writer,
            reader,
            position: Position::at(begun as u64),
            block,
            slot: at.slot,
            made: 0,
            start,
            sink_sample,
            seen: Some(first.number),
            phase: Range::of(0.0),
            fifo: Range::of(0),
            slots: Vec::new(),
            changes: vec![Change {
                number: first.number,
                at: sink_sample + 1,
                before: 0,
                said_ns: world.origin_ns + at.ns().round() as i64,
            }],
            told: 0,
            tape,
        })
    }

    /// Arms a setting.
    ///
    /// # Errors
    /// [`PlayerError`].
    pub fn arm(&mut self, cue: &Cue) -> Result<(), PlayerError> {
        Ok(self.writer.arm(cue)?)
    }

    /// Plays on to the beginning of a slot, up to which the world must be known, and tells what
    /// took effect.
    ///
    /// # Errors
    /// [`PlayerError`].
    pub fn play_to(&mut self, world: &World, slot: usize) -> Result<Vec<Change>, PlayerError> {
        while self.slot < slot {
            if self.slot.is_multiple_of(TIMESCALE_SLOTS) {
                self.writer.set_timescale(&timescale(world, self.slot))?;
            }
            self.play_slot(world);
            self.slot += 1;
        }
        let told = std::mem::replace(&mut self.told, self.changes.len());
        Ok(self.changes[told..].to_vec())
    }

    /// The slot up to whose beginning it has played.
    pub fn slot(&self) -> usize {
        self.slot
    }

    /// All block ends within a slot. Clocks run straight within it, so that the sink's position is
    /// a straight line over the source's.
    fn play_slot(&mut self, world: &World) {
        let from = world.source.at_slot(self.slot);
        let to = world.source.at_slot(self.slot + 1);
        let sink_from = world.sink.at_slot(self.slot);
        let slope = world.sink.in_slot(self.slot) / world.source.in_slot(self.slot);
        let mut slot: Option<Range<f64>> = None;
        loop {
            let end = self.position.after_block(&self.block);
            let inputs = end.inputs();
            if inputs >= to {
                break;
            }
            let sink = sink_from + (inputs - from) * slope;
            self.end_block(end, sink);
            let phase = self.made as f64 - (sink - self.start);
            self.phase.take_in(phase);
            match &mut slot {
                Some(range) => range.take_in(phase),
                None => slot = Some(Range::of(phase)),
            }
        }
        if let Some(phase) = slot {
            let at_ns = self.slot as i64 * SLOT_NS;
            self.slots.push(SlotPhase { at_ns, phase });
        }
    }

    #[inline]
    fn end_block(&mut self, end: Position, sink: f64) {
        self.tape.record(self.made, self.position, &self.block);
        self.made += self.block.outputs;
        self.position = end;
        let before = std::mem::replace(&mut self.sink_sample, sink as u64);
        let taken = self.sink_sample - self.start as u64;
        self.fifo
            .take_in(self.made.cast_signed() - taken.cast_signed());
        self.block = self.reader.next_block(self.sink_sample);
        if self.reader.setting() != self.seen {
            self.seen = self.reader.setting();
            self.note_change(before);
        }
    }

    #[cold]
    fn note_change(&mut self, before: u64) {
        while let Some(applied) = self.writer.next_applied() {
            if Some(applied.number) == self.seen {
                self.changes.push(Change {
                    number: applied.number,
                    at: applied.sink_sample,
                    before,
                    said_ns: applied.house_ns,
                });
            }
        }
    }

    /// What is known at the end.
    pub fn finish(self, world: &World) -> Played {
        Played {
            start: self.start,
            made: self.made,
            taken: self.sink_sample - self.start as u64,
            phase: self.phase,
            fifo: self.fifo,
            slots: self.slots,
            changes: self.changes,
            recordings: self.tape.finish(world, self.start),
        }
    }
}

/// What a player did.
#[derive(Debug)]
pub struct Played {
    /// Sink's position at the start.
    pub start: f64,
    /// Outputs made.
    pub made: u64,
    /// Samples that the sink took meanwhile.
    pub taken: u64,
    /// True phase error at the block ends, sink samples.
    pub phase: Range<f64>,
    /// The FIFO's level from its centre at the block ends, whole samples.
    pub fifo: Range<i64>,
    /// The phase error slot by slot.
    pub slots: Vec<SlotPhase>,
    /// What took effect.
    pub changes: Vec<Change>,
    /// Sound.
    pub recordings: Vec<Recording>,
}

/// Where the sink's count stands at the beginning of a slot: a driver would measure it to some µs.
fn timescale(world: &World, slot: usize) -> Timescale {
    let sample = world.sink.at_slot(slot).ceil();
    let at = world.sink.when(sample);
    Timescale {
        counter_epoch: 0,
        sample: sample as u64,
        house_ns: world.origin_ns + at.ns().round() as i64,
        rate_hz: world.sink.in_slot(slot) * 10.0,
        deviation_ns: 1_000.0,
    }
}
