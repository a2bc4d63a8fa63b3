//! Two free-running clocks, and what is true of them at every house time.
//!
//! Each clock is a simulated one, taken at the ends of slots of 100 ms and straight in between: that
//! is the truth here, for readings, players and judges alike. Positions are samples since the
//! origin, with a part; whole ones are ticks.

use num_rational::Ratio;
use ratewright_timing::sim::{Clock, ClockModel};

/// Length of a slot, ns. A tone of a multiple of 10 Hz makes whole turns in it.
pub const SLOT_NS: i64 = 100_000_000;

/// A clock as the house sees it.
#[derive(Debug)]
pub struct Track {
    /// Nominal rate, Hz.
    pub hz: u32,
    clock: Clock,
    /// Position at the beginning of each slot.
    positions: Vec<f64>,
}

/// A place within a slot.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Instant {
    /// Which slot.
    pub slot: usize,
    /// Seconds since it began.
    pub into_s: f64,
}

impl Instant {
    /// ns since the origin.
    pub fn ns(&self) -> f64 {
        self.slot as f64 * SLOT_NS as f64 + self.into_s * 1e9
    }

    /// Turns, beyond whole ones, that a tone of `hz`, a multiple of 10, has made since the origin.
    pub fn turns(&self, hz: f64) -> f64 {
        self.into_s * hz
    }
}

impl Track {
    /// A clock of this nominal rate, its position 0 at the origin.
    pub fn new(hz: u32, model: ClockModel, seed: u64) -> Self {
        Self {
            hz,
            clock: Clock::new(model, seed),
            positions: vec![0.0],
        }
    }

    /// The nominal rate as declarations have it.
    pub fn nominal_hz(&self) -> Ratio<u64> {
        Ratio::from_integer(self.hz.into())
    }

    /// Makes the truth known up to the end of this slot.
    pub fn extend_to(&mut self, slot: usize) {
        while self.positions.len() < slot + 2 {
            let at_ns = self.positions.len() as i64 * SLOT_NS;
            // Nominal time and what the clock has gained apart: their sum would lose digits.
            let nominal = self.positions.len() as f64 * f64::from(self.hz) / 10.0;
            let gained = self.clock.phase_s(at_ns) * f64::from(self.hz);
            self.positions.push(nominal + gained);
        }
    }

    /// Position at the beginning of a slot.
    pub fn at_slot(&self, slot: usize) -> f64 {
        self.positions[slot]
    }

    /// Samples in a slot.
    pub fn in_slot(&self, slot: usize) -> f64 {
        self.positions[slot + 1] - self.positions[slot]
    }

    /// When the clock is at a position that is known.
    pub fn when(&self, position: f64) -> Instant {
        let after = self.positions.partition_point(|&p| p <= position);
        let slot = after.saturating_sub(1).min(self.positions.len() - 2);
        let part = (position - self.positions[slot]) / self.in_slot(slot);
        Instant {
            slot,
            into_s: part * SLOT_NS as f64 * 1e-9,
        }
    }

    /// The position at a house time, ns since the origin, that is known.
    pub fn at_ns(&self, ns: i64) -> f64 {
        let slot = (ns.div_euclid(SLOT_NS)) as usize;
        let part = ns.rem_euclid(SLOT_NS) as f64 / SLOT_NS as f64;
        self.positions[slot] + part * self.in_slot(slot)
    }
}

/// Where a stream comes from and where it goes.
#[derive(Debug)]
pub struct World {
    /// House time of the origin, ns.
    pub origin_ns: i64,
    /// Clock of the samples that enter the resampler.
    pub source: Track,
    /// Clock of the samples that leave it.
    pub sink: Track,
}

impl World {
    /// Two crystals of common quality (invented figures): 44.1 kHz at +23 ppm and 48 kHz at
    /// −11 ppm, with noise, and a swing of their rates with the temperature of the day.
    pub fn new(origin_ns: i64, seed: u64) -> Self {
        use ratewright_timing::sim::Daily;
        let model = |drift, amplitude, angle| ClockModel {
            drift,
            daily: Some(Daily { amplitude, angle }),
            ..ClockModel::crystal()
        };
        let source = model(23.0e-6, 0.4e-6, 0.3);
        let sink = model(-11.0e-6, 0.3e-6, 2.0);
        Self {
            origin_ns,
            source: Track::new(44_100, source, seed),
            sink: Track::new(48_000, sink, seed + 1),
        }
    }

    /// Makes the truth known up to the end of this slot.
    pub fn extend_to(&mut self, slot: usize) {
        self.source.extend_to(slot);
        self.sink.extend_to(slot);
    }

    /// The slot of a house time, ns.
    pub fn slot_at(&self, house_ns: i64) -> usize {
        ((house_ns - self.origin_ns).max(0) / SLOT_NS) as usize
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn when_and_at_are_inverse_and_tones_turn_whole_in_a_slot() {
        let mut world = World::new(0, 5);
        world.extend_to(20_000);
        for track in [&world.source, &world.sink] {
            for ns in [0, 1, 99_999_999, 100_000_000, 1_234_567_890_123] {
                let back = track.when(track.at_ns(ns)).ns();
                assert!((back - ns as f64).abs() < 0.01, "{ns}: {back}");
            }
        }
        let drift = world.source.at_slot(10_000) / (1_000.0 * 44_100.0) - 1.0;
        assert!((drift - 23e-6).abs() < 1e-6, "{drift}");
    }
}
