//! What is to be played, and how the daemon is set up for it.

use std::net::SocketAddr;
use std::path::Path;

use num_rational::Ratio;
use ratewright_control::{ClockDeclaration, CrossingDeclaration, Id, Realisation};
use ratewright_ratio::Bounds;
use ratewright_server::config::Config;

use super::recording::{PHASE_OUTPUTS, Stretch, Tape};
use super::resampler::Filter;

/// The tones, Hz.
pub const TONES_HZ: [f64; 2] = [1_000.0, 19_000.0];

/// The crossings, each with its way of making a ratio that the bank does not hold, and with what it
/// is resampled: a table can be stepped through by nothing but ours.
pub(super) const PARTS: [(&str, Realisation, Filter); 3] = [
    ("cadence", Realisation::Cadence, Filter::Speex),
    ("stepping", Realisation::Stepping, Filter::Table),
    ("lazy", Realisation::Lazy, Filter::Speex),
];

/// What is to be played.
#[derive(Clone, Copy, Debug)]
pub struct Programme {
    /// House time of readings before the first crossing is declared, s.
    pub settle_s: u32,
    /// Stream time, s.
    pub stream_s: u32,
    /// House seconds for a real one.
    pub pace: f64,
    /// Headroom of each crossing, sink samples: at most 0.6, for a phase of 19 kHz that may be off by
    /// that much either way stays within a turn.
    pub headroom_samples: f64,
    /// Recordings of each part that give a phase, evenly over the stream, the first and the last
    /// included.
    pub phases: u64,
    /// Outputs of the recording in the middle, whose spectrum is taken.
    pub spectrum_outputs: usize,
    /// Seed of the clocks.
    pub seed: u64,
}

impl Programme {
    /// The daemon's configuration.
    pub(super) fn configuration(&self, store: &Path) -> Config {
        let id = |name: &str| Id::new(name).expect("a good name");
        let clock = |name, hz: u32| ClockDeclaration::new(id(name), Ratio::from_integer(hz.into()));
        let bounds = Bounds::new(1_024, 1_024).expect("in range");
        let crossing = |(name, realisation, _)| CrossingDeclaration {
            headroom_samples: self.headroom_samples,
            realisation,
            ..CrossingDeclaration::new(id(name), id("source"), id("sink"), bounds)
        };
        let any_port = SocketAddr::from(([127, 0, 0, 1], 0));
        Config {
            grpc: any_port,
            people: any_port,
            store: store.to_owned(),
            clocks: vec![clock("source", 44_100), clock("sink", 48_000)],
            crossings: PARTS.into_iter().map(crossing).collect(),
            ..Config::default()
        }
    }

    /// When sound is recorded.
    pub(super) fn tape(&self, filter: Filter) -> Tape {
        // A second more than the last phase takes.
        let last_s = f64::from(self.stream_s) - PHASE_OUTPUTS as f64 / 48_000.0 - 1.0;
        let phase = |i: u64| Stretch {
            from_output: (last_s * i as f64 / (self.phases - 1) as f64 * 48_000.0) as u64,
            outputs: PHASE_OUTPUTS,
        };
        let mut stretches: Vec<_> = (0..self.phases).map(phase).collect();
        let middle = &mut stretches[self.phases as usize / 2];
        middle.outputs = middle.outputs.max(self.spectrum_outputs);
        Tape::new(filter, &TONES_HZ, &stretches)
    }
}
