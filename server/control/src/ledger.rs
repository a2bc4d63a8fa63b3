//! The account of a crossing's phase error φ, in sink samples (signs: [`crate::signs`]).
//!
//! φ = Σ (r·f_source·(Δt + Δx_source) − f_sink·(Δt + Δx_sink)) over the stretches of the timeline,
//! x being the time each clock has gained on house time ([`crate::passage`]). The timeline holds
//! the planned instants until a follower reports the true ones.
//!
//! **Variance.** That of both passages, plus an offset's: what reports and blocks leave open, a
//! random walk of [`WALK`], and what occupancy could not say better; and that of a running error
//! which a single ratio has taken over (uniform within its bound: a third of its square). Where a
//! follower reports its level, less what that tells of the clocks' present phases
//! ([`crate::heard`]).

mod levels;

use serde::{Deserialize, Serialize};

use crate::HouseNs;
use crate::clocks::Traced;
use crate::heard::{Heard, Moments};
use crate::heed::Contest;
use crate::passage::Passage;
use crate::signs::{phase_velocity, true_rate};
use crate::timeline::{Entry, Rival, Stretch, Timeline, as_double};
use levels::AtOdds;
pub(crate) use levels::{Level, Levelled};

/// Growth of the offset's variance, samples² a second: 0.01 samples a day (own choice: block
/// ends and the rounding of a follower's buffer).
const WALK: f64 = 1e-9;

/// The account of one crossing.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) struct Ledger {
    /// Nominal rates, Hz.
    source_hz: f64,
    sink_hz: f64,
    pub(crate) timeline: Timeline,
    /// Integrated up to here; none before the stream begins.
    at_ns: Option<HouseNs>,
    /// It was last begun anew here: what was before has no part in it.
    centred_ns: HouseNs,
    phase_samples: f64,
    offset_variance: f64,
    /// Variance of what a running error has left to the single ratio in force, samples².
    left_variance: f64,
    source: Passage,
    sink: Passage,
    /// What levels have told of the clocks' present phases, if there were any.
    heard: Option<Box<Heard>>,
    /// What levels say of whether the newest setting runs, while that is open.
    contest: Option<Box<Contest>>,
    /// Levels in a row that were at odds with the account to one side, if there were any.
    at_odds: Option<Box<AtOdds>>,
}

impl Ledger {
    /// An empty account between two nominal rates, Hz.
    pub(crate) fn new(source_hz: f64, sink_hz: f64) -> Self {
        Ledger {
            source_hz,
            sink_hz,
            timeline: Timeline::default(),
            at_ns: None,
            centred_ns: HouseNs::MIN,
            phase_samples: 0.0,
            offset_variance: 0.0,
            left_variance: 0.0,
            source: Passage::begin(0),
            sink: Passage::begin(0),
            heard: None,
            contest: None,
            at_odds: None,
        }
    }

    /// Phase error, sink samples.
    pub(crate) fn phase_samples(&self) -> f64 {
        let heard = self.heard.as_ref();
        self.phase_samples + heard.map_or(0.0, |heard| heard.phase)
    }

    /// Variance of the phase error, samples².
    pub(crate) fn variance(&self) -> f64 {
        self.lasting_variance() + self.passing_variance()
    }

    /// The part of it that later readings take away, samples².
    fn passing_variance(&self) -> f64 {
        let passages = self.source.passing_variance_ns2() + self.sink.passing_variance_ns2();
        let heard = self.heard.as_ref();
        heard.map_or_else(|| self.samples2(passages), |heard| heard.left.phase)
    }

    /// What levels have told of the clocks' present phases.
    pub(crate) fn heard(&self) -> Option<&Heard> {
        self.heard.as_deref()
    }

    /// What was heard was of phases that count no more: it is part of the account from now on.
    fn keep_heard(&mut self) {
        if let Some(heard) = self.heard.take() {
            self.phase_samples += heard.phase;
        }
    }

    /// The part of it that no later reading takes away, samples².
    pub(crate) fn lasting_variance(&self) -> f64 {
        let passages = self.source.lasting_variance_ns2() + self.sink.lasting_variance_ns2();
        self.offset_variance + self.left_variance + self.samples2(passages)
    }

    /// What made the ratio on average gave way to a single ratio with a running error anywhere up
    /// to `most_samples`, which that one keeps; 0 if something has brought it within its own.
    pub(crate) fn leave_error(&mut self, most_samples: f64) {
        self.left_variance = most_samples * most_samples / 3.0;
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
        self.centred_ns = now;
        self.phase_samples = phase_samples;
        self.offset_variance = variance;
        self.left_variance = 0.0;
        self.source = Passage::begin(now);
        self.sink = Passage::begin(now);
        self.heard = self.heard.take().and_then(Heard::centred);
        self.contest = None;
        self.at_odds = None;
    }

    /// The stream comes from another source of the same nominal rate from `now` on, to which the
    /// account is advanced. It goes on, with what is uncertain of the source so far.
    pub(crate) fn hand_over(&mut self, now: HouseNs) {
        self.keep_heard();
        self.source.hand_over(now);
    }

    /// Begins anew between these nominal rates, Hz: with the effect of the setting of a number, which
    /// is to come, or else now.
    pub(crate) fn begin_anew(&mut self, now: HouseNs, hz: (f64, f64), with: Option<u64>) {
        (self.source_hz, self.sink_hz) = hz;
        self.heard = None;
        if let Some(number) = with {
            self.timeline.begin_with(number);
        }
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
        let legs = (self.source.begins_ns(), self.sink.begins_ns());
        // A revision of the past counts as gained just now: the ratios differ by some ppm at most.
        let source_ns = self.source.advance(at_ns, now, source);
        let sink_ns = self.sink.advance(at_ns, now, sink);
        if legs != (self.source.begins_ns(), self.sink.begins_ns()) {
            self.keep_heard();
        }
        let whole_ns = (now - at_ns) as f64;
        for stretch in self.timeline.stretches(at_ns, now) {
            let part_ns = (stretch.to_ns - stretch.from_ns) as f64;
            let share = part_ns / whole_ns;
            let made = stretch.ratio * self.source_hz * (part_ns + share * source_ns);
            let taken = self.sink_hz * (part_ns + share * sink_ns);
            self.phase_samples += (made - taken) * 1e-9;
        }
        self.offset_variance += WALK * whole_ns * 1e-9;
        if let Some(heard) = &mut self.heard {
            let moments = Moments::of(source, sink, self.sink_hz);
            heard.advance(whole_ns * 1e-9, moments, Heard::in_gap(source, sink));
        }
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
        let sink_hz = true_rate(self.sink_hz, sink.estimate.drift);
        let heard = self.heard.as_ref().map_or(0.0, |heard| heard.velocity);
        phase_velocity(ratio, source_hz, sink_hz) + heard
    }

    /// How much faster the phase error would grow under the other of two ratios, samples/s.
    fn velocity_apart(&self, rival: &Rival, source: &Traced, sink: &Traced) -> f64 {
        self.velocity(rival.other, source, sink) - self.velocity(rival.runs, source, sink)
    }

    /// Adds a setting to the timeline.
    pub(crate) fn set(&mut self, entry: Entry) {
        if self.timeline.last_ratio() != Some(as_double(&entry.ratio)) {
            self.contest = None;
        }
        self.timeline.push(entry);
    }

    /// If the follower reports what it applies, and has not reported the newest setting `late_ns`
    /// after its effect: the ratio that may still run, and the phase error that it would have made
    /// by now, to which the account is advanced, sink samples.
    pub(crate) fn unreported(
        &self,
        late_ns: i64,
        source: &Traced,
        sink: &Traced,
    ) -> Option<(f64, f64)> {
        let at_ns = self.at_ns.filter(|_| self.timeline.is_reported())?;
        if self.timeline.unheeded().is_some() {
            return None;
        }
        let rival = self.timeline.rival(at_ns)?;
        let since_ns = rival.since_ns.max(self.centred_ns);
        let more = self.velocity_apart(&rival, source, sink);
        (at_ns - rival.since_ns >= late_ns).then(|| {
            let seconds = (at_ns - since_ns) as f64 * 1e-9;
            (rival.other, self.phase_samples() + more * seconds)
        })
    }

    /// A follower has said when a setting truly took effect. The account must be advanced to now.
    pub(crate) fn applied(
        &mut self,
        number: u64,
        truly_ns: HouseNs,
        source: &Traced,
        sink: &Traced,
    ) {
        let (begun_ns, before) = (self.timeline.begins_ns(), self.timeline.clone());
        let from_ns = self.timeline.correct(number, truly_ns);
        self.timeline.reported(number);
        let (Some(from_ns), Some(at_ns)) = (from_ns, self.at_ns) else {
            return;
        };
        if self.timeline.begins_ns() != begun_ns && self.centred_ns <= from_ns {
            // The stream began at another time: all of it is integrated once more from there.
            (self.at_ns, self.phase_samples) = (None, 0.0);
            self.advance(at_ns, source, sink);
            return;
        }
        let from_ns = from_ns.max(self.centred_ns);
        let gained = |timeline: &Timeline| -> f64 {
            let part = |stretch: Stretch| {
                let seconds = (stretch.to_ns - stretch.from_ns) as f64 * 1e-9;
                self.velocity(stretch.ratio, source, sink) * seconds
            };
            timeline.stretches(from_ns, at_ns).map(part).sum()
        };
        self.phase_samples += gained(&self.timeline) - gained(&before);
    }
}

#[cfg(test)]
mod tests {
    use num_rational::Ratio;
    use ratewright_timing::exact;

    use super::*;
    use crate::link::Lineage;

    pub(super) const SECOND: i64 = 1_000_000_000;

    /// A measured clock of this drift and phase, with so much uncertainty of the phase.
    pub(super) fn clock(now: i64, drift: f64, phase_ns: f64, phase_deviation_ns: f64) -> Traced {
        let estimate = ratewright_timing::Estimate {
            drift,
            phase_ns,
            phase_deviation_ns,
            ..exact(now)
        };
        Traced {
            estimate,
            lineage: Lineage::of(1),
            measured: true,
            restart: None,
            settled: true,
        }
    }

    pub(super) fn still(now: i64) -> Traced {
        Traced {
            estimate: exact(now),
            lineage: Lineage::default(),
            measured: true,
            restart: None,
            settled: true,
        }
    }

    fn entry(number: u64, ratio: Ratio<u64>, effect_ns: HouseNs) -> Entry {
        Entry {
            epoch: 1,
            number,
            ratio,
            decided_ns: effect_ns,
            effect_ns,
            is_reported: false,
        }
    }

    /// An account that began at 0 with 160/147, and got 320/293 at 10 s.
    pub(super) fn account() -> Ledger {
        let mut ledger = Ledger::new(44_100.0, 48_000.0);
        ledger.set(entry(1, Ratio::new(160, 147), 0));
        ledger.set(entry(2, Ratio::new(320, 293), 10 * SECOND));
        ledger
    }

    #[test]
    fn the_account_is_the_exact_integral() {
        let mut ledger = account();
        // The source gains 10 ppm; looked at at odd times, one of them across the change.
        for second in [0, 3, 4, 17, 25] {
            let now = second * SECOND;
            ledger.advance(
                now,
                &clock(now, 1e-5, 1e4 * second as f64, 0.0),
                &still(now),
            );
        }
        let came = |seconds: f64| 44_100.0 * seconds * (1.0 + 1e-5);
        let made = came(10.0) * 160.0 / 147.0 + came(15.0) * 320.0 / 293.0;
        let exactly = made - 48_000.0 * 25.0;
        assert!(
            (ledger.phase_samples() - exactly).abs() < 1e-6,
            "{}",
            ledger.phase_samples()
        );
    }

    #[test]
    fn nothing_is_counted_before_the_stream_begins() {
        let mut ledger = Ledger::new(48_000.0, 48_000.0);
        ledger.set(entry(1, Ratio::new(1, 1), 10 * SECOND));
        for second in [5, 20] {
            let now = second * SECOND;
            ledger.advance(
                now,
                &clock(now, 1e-5, 1e4 * second as f64, 0.0),
                &still(now),
            );
        }
        assert!(
            (ledger.phase_samples() - 0.48 * 10.0).abs() < 1e-6,
            "{}",
            ledger.phase_samples()
        );
    }

    #[test]
    fn a_report_moves_the_effect_to_where_it_was() {
        let run = |reported_ns: HouseNs| {
            let mut ledger = account();
            let now = 25 * SECOND;
            ledger.advance(now, &clock(now, 0.0, 0.0, 0.0), &still(now));
            ledger.applied(2, reported_ns, &clock(now, 0.0, 0.0, 0.0), &still(now));
            ledger.phase_samples()
        };
        let faster = 44_100.0 * (320.0 / 293.0 - 160.0 / 147.0);
        assert!((run(10 * SECOND) - 15.0 * faster).abs() < 1e-6);
        assert!(
            (run(12 * SECOND) - 13.0 * faster).abs() < 1e-6,
            "late: less of the new ratio"
        );
        assert!(
            (run(8 * SECOND) - 17.0 * faster).abs() < 1e-6,
            "early: more of it"
        );
    }

    /// A player that was started again says that it runs what ran before.
    #[test]
    fn the_first_report_of_a_setting_stands() {
        let mut ledger = account();
        for now in [12, 900].map(|second| second * SECOND) {
            let source = clock(now, 0.0, 0.0, 0.0);
            ledger.advance(now, &source, &still(now));
            ledger.applied(2, now, &source, &still(now));
        }
        let faster = 44_100.0 * (320.0 / 293.0 - 160.0 / 147.0);
        assert!((ledger.phase_samples() - 888.0 * faster).abs() < 1e-6);
    }
}
