//! The account of a crossing's phase error φ, in sink samples (signs: [`crate::signs`]).
//!
//! φ = Σ (r·f_source·(Δt + Δx_source) − f_sink·(Δt + Δx_sink)) over the stretches of the timeline,
//! x being the time each clock has gained on house time ([`crate::passage`]). The timeline holds
//! the planned instants until a follower reports the true ones.
//!
//! **Variance.** That of both passages, plus an offset's: what reports and blocks leave open, a
//! random walk of [`WALK`], and what occupancy could not say better.

use serde::{Deserialize, Serialize};

use crate::HouseNs;
use crate::clocks::Traced;
use crate::passage::Passage;
use crate::signs::{phase_velocity, true_rate};
use crate::timeline::{Entry, Timeline};

/// Growth of the offset's variance, samples² a second: 0.01 samples a day (own choice: block
/// ends and the rounding of a follower's buffer).
const WALK: f64 = 1e-9;
/// An occupancy further off than so many standard deviations is at odds with the account.
const AT_ODDS: f64 = 5.0;
/// So many in a row mean that the buffer was moved.
const AT_ODDS_IN_A_ROW: u32 = 3;

/// The account of one crossing.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) struct Ledger {
    /// Nominal rates, Hz.
    source_hz: f64,
    sink_hz: f64,
    pub(crate) timeline: Timeline,
    /// Integrated up to here; none before the stream begins.
    at_ns: Option<HouseNs>,
    phase_samples: f64,
    offset_variance: f64,
    source: Passage,
    sink: Passage,
    /// Occupancies in a row that were at odds with the account, and to which side.
    at_odds: i32,
}

/// How an occupancy went in.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(crate) enum Levelled {
    /// It corrected the account.
    Corrected,
    /// It was at odds with it, and was set aside.
    SetAside,
    /// It was one too many at odds: the account goes on from the level.
    Moved,
}

impl Ledger {
    /// An empty account between two nominal rates, Hz.
    pub(crate) fn new(source_hz: f64, sink_hz: f64) -> Self {
        Ledger {
            source_hz,
            sink_hz,
            timeline: Timeline::default(),
            at_ns: None,
            phase_samples: 0.0,
            offset_variance: 0.0,
            source: Passage::begin(0),
            sink: Passage::begin(0),
            at_odds: 0,
        }
    }

    /// Phase error, sink samples.
    pub(crate) fn phase_samples(&self) -> f64 {
        self.phase_samples
    }

    /// Variance of the phase error, samples².
    pub(crate) fn variance(&self) -> f64 {
        self.offset_variance + self.samples2(self.source.variance_ns2() + self.sink.variance_ns2())
    }

    /// A variance in ns² of either clock as samples² of the sink.
    fn samples2(&self, variance_ns2: f64) -> f64 {
        variance_ns2 * self.sink_hz * self.sink_hz * 1e-18
    }

    /// Begins anew at `now` with a phase error and its variance; the timeline stays.
    pub(crate) fn centre(&mut self, now: HouseNs, phase_samples: f64, variance: f64) {
        self.at_ns = self
            .timeline
            .begins_ns()
            .filter(|&begins| begins <= now)
            .map(|_| now);
        self.phase_samples = phase_samples;
        self.offset_variance = variance;
        self.source = Passage::begin(now);
        self.sink = Passage::begin(now);
        self.at_odds = 0;
    }

    /// Takes other nominal rates, Hz: the account begins anew.
    pub(crate) fn change_rates(&mut self, now: HouseNs, source_hz: f64, sink_hz: f64) {
        (self.source_hz, self.sink_hz) = (source_hz, sink_hz);
        self.centre(now, 0.0, 0.0);
    }

    /// Integrates up to `now`, at which the clocks' estimates are these.
    pub(crate) fn advance(&mut self, now: HouseNs, source: &Traced, sink: &Traced) {
        let Some(at_ns) = self.at_ns.or_else(|| self.open(now)) else {
            return;
        };
        if now <= at_ns {
            return;
        }
        // A revision of the past counts as gained just now: the ratios differ by some ppm at most.
        let source_ns = self.source.advance(at_ns, now, source);
        let sink_ns = self.sink.advance(at_ns, now, sink);
        let whole_ns = (now - at_ns) as f64;
        for stretch in self.timeline.stretches(at_ns, now) {
            let part_ns = (stretch.to_ns - stretch.from_ns) as f64;
            let share = part_ns / whole_ns;
            let made = stretch.ratio * self.source_hz * (part_ns + share * source_ns);
            let taken = self.sink_hz * (part_ns + share * sink_ns);
            self.phase_samples += (made - taken) * 1e-9;
        }
        self.offset_variance += WALK * whole_ns * 1e-9;
        self.at_ns = Some(now);
    }

    /// The stream begins with its first setting's effect.
    fn open(&mut self, now: HouseNs) -> Option<HouseNs> {
        let begins_ns = self.timeline.begins_ns().filter(|&begins| begins <= now)?;
        self.source = Passage::begin(begins_ns);
        self.sink = Passage::begin(begins_ns);
        self.at_ns = Some(begins_ns);
        Some(begins_ns)
    }

    /// Growth of the phase error under a ratio, sink samples a second.
    pub(crate) fn velocity(&self, ratio: f64, source: &Traced, sink: &Traced) -> f64 {
        let source_hz = true_rate(self.source_hz, source.estimate.drift);
        phase_velocity(
            ratio,
            source_hz,
            true_rate(self.sink_hz, sink.estimate.drift),
        )
    }

    /// Adds a setting to the timeline.
    pub(crate) fn set(&mut self, entry: Entry) {
        self.timeline.push(entry);
    }

    /// A follower has said when a setting truly took effect. The account must be advanced to now.
    pub(crate) fn applied(
        &mut self,
        number: u64,
        truly_ns: HouseNs,
        source: &Traced,
        sink: &Traced,
    ) {
        let integrated_ns = self.at_ns.unwrap_or(HouseNs::MIN);
        let Some(correction) = self.timeline.correct(number, truly_ns, integrated_ns) else {
            return;
        };
        let seconds = (correction.to_ns.saturating_sub(correction.from_ns)) as f64 * 1e-9;
        let velocity =
            |ratio: Option<f64>| ratio.map_or(0.0, |ratio| self.velocity(ratio, source, sink));
        self.phase_samples += (velocity(correction.truly) - velocity(correction.assumed)) * seconds;
    }

    /// A follower has measured its buffer: `level` samples, `age_s` seconds ago, with this
    /// variance. The account must be advanced to now, at which φ grows with `velocity`.
    ///
    /// A scalar Kalman correction: with V the lasting variance and W that of the clocks' present
    /// phases, the gain is V/(V + W + R), and V shrinks by one minus that.
    pub(crate) fn level(
        &mut self,
        level: f64,
        variance: f64,
        age_s: f64,
        velocity: f64,
    ) -> Levelled {
        let innovation = level - (self.phase_samples - velocity * age_s);
        let passages = self.source.lasting_variance_ns2() + self.sink.lasting_variance_ns2();
        let lasting = self.offset_variance + self.samples2(passages);
        let whole = self.variance() + variance;
        if innovation.abs() > AT_ODDS * whole.sqrt() {
            return self.at_odds(innovation, variance);
        }
        let gain = lasting / whole;
        self.phase_samples += gain * innovation;
        self.offset_variance *= 1.0 - gain;
        self.source.sharpen(1.0 - gain);
        self.sink.sharpen(1.0 - gain);
        self.at_odds = 0;
        Levelled::Corrected
    }

    fn at_odds(&mut self, innovation: f64, variance: f64) -> Levelled {
        let side = if innovation > 0.0 { 1 } else { -1 };
        self.at_odds = if self.at_odds.signum() == side {
            self.at_odds + side
        } else {
            side
        };
        if self.at_odds.unsigned_abs() < AT_ODDS_IN_A_ROW {
            return Levelled::SetAside;
        }
        self.phase_samples += innovation;
        self.offset_variance = variance;
        self.source.sharpen(0.0);
        self.sink.sharpen(0.0);
        self.at_odds = 0;
        Levelled::Moved
    }
}
