//! What an operator declares: clocks and crossings.

use num_rational::Ratio;
use ratewright_ratio::Bounds;
use ratewright_timing::{LatencyTail, LinkConfig, Oscillator};
use serde::{Deserialize, Serialize};

use crate::{Id, Refusal};

/// Longest display name, bytes.
const MAX_DISPLAY_NAME: usize = 128;
/// Largest headroom, sink samples.
const MAX_HEADROOM_SAMPLES: f64 = 1e9;
/// Longest lead, ns (10 minutes).
const MAX_LEAD_NS: i64 = 600_000_000_000;
/// Shortest and longest review horizon, ns (10 s, 30 days).
const REVIEW_HORIZON_NS: (i64, i64) = (10_000_000_000, 30 * 86_400_000_000_000);
/// Longest floor between two changes, ns (1 h).
const MAX_LEAST_HOLD_NS: i64 = 3_600_000_000_000;
/// Least and largest pitch limit, ppm.
const PITCH_LIMITS_PPM: (f64, f64) = (0.1, 1000.0);
/// Largest step of a counter or of timestamps, ns (1 s).
const MAX_QUANTUM_NS: i64 = 1_000_000_000;
/// Largest nominal ratio of a crossing, and its inverse the smallest.
const MAX_NOMINAL_RATIO: f64 = 1_048_576.0;

/// A clock: anything that ticks at a nominal rate.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct ClockDeclaration {
    /// Its name.
    pub id: Id,
    /// What people call it; at most 128 bytes.
    pub display_name: String,
    /// Nominal rate, Hz, exact.
    pub nominal_hz: Ratio<u64>,
    /// True if it is house time itself: its drift is 0 by definition and nobody measures it.
    pub exact: bool,
    /// Bound of the drift that its maker or standard states, ppm; 0 if none is declared.
    pub tolerance_ppm: f64,
    /// Kind of its oscillator, if it is known: sets what is believed before anything is measured,
    /// and how far its drift may wander. Here and below, links that run already keep to what they
    /// began with.
    pub oscillator: Option<Oscillator>,
    /// Which way its one-way readings err when they are not punctual, if that is known.
    pub tail: Option<LatencyTail>,
    /// Step of its counter or of its timestamps, ns, where it is coarser than a tick of the
    /// nominal rate; 0 if it is not known, at most 1 s.
    pub quantum_ns: i64,
    /// True if stability statistics of it are to be kept.
    pub statistics: bool,
}

/// What the resampler of a crossing can do.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub enum Realisation {
    /// It runs at one ratio until it is told another.
    Single,
    /// It can alternate between two ratios at block ends by itself.
    Cadence,
    /// It has one table of `max_l` phases, and moves on by one number of phases or by one more at
    /// any output, by itself; `max_m` is not looked at.
    Stepping,
    /// It can hold each of two ratios in turn, by itself, until its running error would leave a
    /// swing.
    Lazy,
}

/// Pitch limit of a crossing for which none is declared, ppm: far below what is heard.
pub const DEFAULT_PITCH_LIMIT_PPM: f64 = 20.0;

/// A place where a stream passes from a source clock to a sink clock.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct CrossingDeclaration {
    /// Its name.
    pub id: Id,
    /// What people call it; at most 128 bytes.
    pub display_name: String,
    /// Clock of the samples that enter the resampler.
    pub source: Id,
    /// Clock of the samples that leave it.
    pub sink: Id,
    /// Bounds of L and M.
    pub bounds: Bounds,
    /// Hard limit of the phase error's magnitude, sink samples, above 0 and at most 1e9.
    pub headroom_samples: f64,
    /// What the resampler can do.
    pub realisation: Realisation,
    /// Crossings of one group get settings with the same effect instant.
    pub group: Option<Id>,
    /// From decision to effect, ns: covers delivery and a block; 0 to 10 minutes.
    pub lead_ns: i64,
    /// A setting is confirmed or replaced after this time at the latest, ns; 10 s to 30 days.
    pub review_horizon_ns: i64,
    /// Least time between two settings that change what is run, ns; renewals do not count. 0 for
    /// none, at most 1 h.
    pub least_hold_ns: i64,
    /// Fastest deliberate change of pitch to bring the phase error back, ppm, 0.1 to 1000.
    pub pitch_limit_ppm: f64,
    /// True for a trial: settings are decided and recorded, but nobody is to run them.
    pub silent: bool,
    /// Clock of another source that can carry the same stream.
    pub backup: Option<Id>,
}

impl ClockDeclaration {
    /// A clock of which nothing but the nominal rate, Hz, is declared.
    pub fn new(id: Id, nominal_hz: Ratio<u64>) -> Self {
        ClockDeclaration {
            id,
            display_name: String::new(),
            nominal_hz,
            exact: false,
            tolerance_ppm: 0.0,
            oscillator: None,
            tail: None,
            quantum_ns: 0,
            statistics: false,
        }
    }

    /// The declaration as the estimator wants it.
    pub(crate) fn link_config(&self) -> LinkConfig {
        let plain = LinkConfig::new(self.nominal_hz);
        LinkConfig {
            tolerance_ppm: Some(self.tolerance_ppm).filter(|&ppm| ppm > 0.0),
            oscillator: self.oscillator.unwrap_or(plain.oscillator),
            latency_tail: self.tail.unwrap_or(plain.latency_tail),
            quantum_s: Some(self.quantum_ns as f64 * 1e-9).filter(|&s| s > 0.0),
            ..plain
        }
    }

    pub(crate) fn check(&self) -> Result<(), Refusal> {
        check_display_name(&self.display_name)?;
        let tolerance = self.tolerance_ppm;
        if !(tolerance == 0.0 || (tolerance > 0.0 && tolerance <= 100_000.0)) {
            return Err(Refusal::invalid(
                "tolerance_ppm",
                tolerance,
                "0 for none, or above 0 to 100000",
            ));
        }
        if !(0..=MAX_QUANTUM_NS).contains(&self.quantum_ns) {
            let accepted = format!("0 if it is not known, up to {MAX_QUANTUM_NS} ns");
            return Err(Refusal::invalid("quantum_ns", self.quantum_ns, accepted));
        }
        ratewright_timing::Link::new(self.link_config())
            .map(|_| ())
            .map_err(|e| Refusal::invalid(e.field, e.value, e.accepted))
    }

    /// Nominal rate, Hz, as the nearest double.
    pub(crate) fn hz(&self) -> f64 {
        *self.nominal_hz.numer() as f64 / *self.nominal_hz.denom() as f64
    }
}

impl CrossingDeclaration {
    /// A crossing of two clocks with these bounds and, for the rest: one sample of headroom, a
    /// cadence, no group, 1 s of lead, a review every 24 h, no floor between changes, the
    /// [`DEFAULT_PITCH_LIMIT_PPM`], and no backup.
    pub fn new(id: Id, source: Id, sink: Id, bounds: Bounds) -> Self {
        CrossingDeclaration {
            id,
            display_name: String::new(),
            source,
            sink,
            bounds,
            headroom_samples: 1.0,
            realisation: Realisation::Cadence,
            group: None,
            lead_ns: 1_000_000_000,
            review_horizon_ns: 86_400_000_000_000,
            least_hold_ns: 0,
            pitch_limit_ppm: DEFAULT_PITCH_LIMIT_PPM,
            silent: false,
            backup: None,
        }
    }

    /// Checks what can be checked without looking at the clocks.
    pub(crate) fn check(&self) -> Result<(), Refusal> {
        check_display_name(&self.display_name)?;
        if self.source == self.sink {
            return Err(Refusal::invalid(
                "sink",
                &self.sink,
                "another clock than the source",
            ));
        }
        let headroom = self.headroom_samples;
        if !(headroom > 0.0 && headroom <= MAX_HEADROOM_SAMPLES) {
            let accepted = format!("above 0, at most {MAX_HEADROOM_SAMPLES} sink samples");
            return Err(Refusal::invalid("headroom_samples", headroom, accepted));
        }
        if !(0..=MAX_LEAD_NS).contains(&self.lead_ns) {
            return Err(Refusal::invalid(
                "lead_ns",
                self.lead_ns,
                format!("0 to {MAX_LEAD_NS} ns"),
            ));
        }
        let (least, most) = REVIEW_HORIZON_NS;
        if !(least..=most).contains(&self.review_horizon_ns) {
            let accepted = format!("{least} to {most} ns");
            return Err(Refusal::invalid(
                "review_horizon_ns",
                self.review_horizon_ns,
                accepted,
            ));
        }
        if !(0..=MAX_LEAST_HOLD_NS).contains(&self.least_hold_ns) {
            let accepted = format!("0 for none, up to {MAX_LEAST_HOLD_NS} ns");
            return Err(Refusal::invalid(
                "least_hold_ns",
                self.least_hold_ns,
                accepted,
            ));
        }
        let (least, most) = PITCH_LIMITS_PPM;
        if !(least..=most).contains(&self.pitch_limit_ppm) {
            let accepted = format!("{least} to {most} ppm");
            return Err(Refusal::invalid(
                "pitch_limit_ppm",
                self.pitch_limit_ppm,
                accepted,
            ));
        }
        self.check_backup()
    }

    fn check_backup(&self) -> Result<(), Refusal> {
        let Some(backup) = &self.backup else {
            return Ok(());
        };
        if *backup != self.source && *backup != self.sink {
            return Ok(());
        }
        let accepted = "none, or another clock than the source and the sink";
        Err(Refusal::invalid("backup", backup, accepted))
    }

    /// The clocks it names: source, sink, and backup if there is one.
    pub(crate) fn clocks(&self) -> impl Iterator<Item = &Id> {
        [&self.source, &self.sink].into_iter().chain(&self.backup)
    }

    /// True if a setting made under the old declaration must not stand: its clocks, what the
    /// resampler can do, the headroom, or whether it is run at all.
    pub(crate) fn asks_for_another_setting_than(&self, old: &CrossingDeclaration) -> bool {
        let decides = |d: &CrossingDeclaration| {
            (
                (d.source.clone(), d.sink.clone()),
                (d.bounds, d.realisation, d.headroom_samples),
                d.silent,
            )
        };
        decides(self) != decides(old)
    }

    /// Checks the ratio of the nominal rates; `field` is what to blame.
    pub(crate) fn check_rates(
        field: &str,
        source: &ClockDeclaration,
        sink: &ClockDeclaration,
    ) -> Result<(), Refusal> {
        let ratio = sink.hz() / source.hz();
        if (1.0 / MAX_NOMINAL_RATIO..=MAX_NOMINAL_RATIO).contains(&ratio) {
            return Ok(());
        }
        let value = format!("{} Hz for {} Hz", sink.nominal_hz, source.nominal_hz);
        let accepted = format!("rates within a factor of {MAX_NOMINAL_RATIO} of each other");
        Err(Refusal::invalid(field, value, accepted))
    }
}

fn check_display_name(name: &str) -> Result<(), Refusal> {
    if name.len() <= MAX_DISPLAY_NAME {
        return Ok(());
    }
    let accepted = format!("at most {MAX_DISPLAY_NAME} bytes");
    Err(Refusal::invalid(
        "display_name",
        format!("{} bytes", name.len()),
        accepted,
    ))
}
