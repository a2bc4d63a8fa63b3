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

use serde::{Deserialize, Serialize};

use crate::HouseNs;
use crate::clocks::Traced;
use crate::heard::{Heard, Moments};
use crate::heed::{Contest, Verdict};
use crate::passage::Passage;
use crate::signs::{phase_velocity, true_rate};
use crate::timeline::{Entry, Rival, Stretch, Timeline, as_double};

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
    /// Occupancies in a row that were at odds with the account, and to which side.
    at_odds: i32,
}

/// What a follower has measured of its buffer.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(crate) struct Level {
    /// From the centre.
    pub(crate) samples: f64,
    pub(crate) variance: f64,
    /// How long ago it was.
    pub(crate) age_s: f64,
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
    /// It has decided that the newest setting does not run.
    NotHeeded,
    /// It has decided that the newest setting, which did not run, now does.
    TakenUp,
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
            at_odds: 0,
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
        self.heard = None;
        self.contest = None;
        self.at_odds = 0;
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

    /// A follower has measured its buffer. The account must be advanced to now, at which the
    /// clocks' estimates are these. Nothing is levelled before the stream begins.
    ///
    /// A Kalman correction: with V the lasting variance, Q what is left of that of the clocks'
    /// present phases, and R the level's, V is corrected with the gain V/(V + Q + R) and Q with
    /// Q/(V + Q + R).
    pub(crate) fn level(
        &mut self,
        level: Level,
        source: &Traced,
        sink: &Traced,
    ) -> Option<Levelled> {
        let ratio = self.timeline.ratio_at(self.at_ns?)?;
        let velocity = self.velocity(ratio, source, sink);
        let innovation = level.samples - (self.phase_samples() - velocity * level.age_s);
        let (lasting, passing) = (self.lasting_variance(), self.passing_variance());
        let whole = lasting + passing + level.variance;
        if let Some(verdict) = self.contested(innovation, whole, source, sink) {
            return Some(verdict);
        }
        if innovation.abs() > AT_ODDS * whole.sqrt() {
            return Some(self.at_odds(innovation, level.variance));
        }
        if let Some(contest) = &mut self.contest {
            contest.corrected((lasting + passing) / whole);
        }
        let gain = lasting / whole;
        self.phase_samples += gain * innovation;
        self.offset_variance *= 1.0 - gain;
        self.left_variance *= 1.0 - gain;
        self.source.sharpen(1.0 - gain);
        self.sink.sharpen(1.0 - gain);
        let begun = || Box::new(Heard::begin(Moments::of(source, sink, self.sink_hz)));
        let heard = self.heard.get_or_insert_with(begun);
        heard.correct(innovation, whole);
        self.at_odds = 0;
        Some(Levelled::Corrected)
    }

    /// Weighs a level in the contest of what runs, if there is one. Gives what it decides; the level
    /// itself then corrects nothing.
    fn contested(
        &mut self,
        innovation: f64,
        whole: f64,
        source: &Traced,
        sink: &Traced,
    ) -> Option<Levelled> {
        let at_ns = self.at_ns?;
        let is_unheeded = self.timeline.unheeded().is_some();
        let Some(rival) = self.timeline.rival(at_ns) else {
            self.contest = None;
            return None;
        };
        let more = self.velocity_apart(&rival, source, sink);
        let begun = || Box::new(Contest::begin(rival.since_ns.max(self.centred_ns)));
        let contest = self.contest.get_or_insert_with(begun);
        contest.advance(at_ns, more);
        match contest.weigh(innovation, whole) {
            Verdict::Other if is_unheeded => {
                self.phase_samples += contest.apart;
                self.timeline.take_up_newest(contest.since_ns);
                self.contest = None;
                Some(Levelled::TakenUp)
            }
            Verdict::Other => {
                self.phase_samples += contest.apart;
                self.timeline.give_up_newest();
                self.contest = None;
                Some(Levelled::NotHeeded)
            }
            Verdict::Kept if !is_unheeded => {
                self.timeline.confirm_newest();
                self.contest = None;
                None
            }
            _ if is_unheeded && contest.is_idle() => {
                **contest = Contest::begin(at_ns);
                None
            }
            _ => None,
        }
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
        self.centred_ns = self.at_ns.unwrap_or(self.centred_ns);
        self.phase_samples += innovation;
        self.offset_variance = variance;
        self.left_variance = 0.0;
        self.source.sharpen(0.0);
        self.sink.sharpen(0.0);
        self.contest = None;
        self.at_odds = 0;
        Levelled::Moved
    }
}

#[cfg(test)]
mod tests {
    use num_rational::Ratio;
    use ratewright_timing::exact;

    use super::*;
    use crate::link::Lineage;

    const SECOND: i64 = 1_000_000_000;

    /// A measured clock of this drift and phase, with so much uncertainty of the phase.
    fn clock(now: i64, drift: f64, phase_ns: f64, phase_deviation_ns: f64) -> Traced {
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

    fn still(now: i64) -> Traced {
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
    fn account() -> Ledger {
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

    /// A level measured now of an account that was advanced to `now` between a clock of 1 µs and a
    /// still one.
    fn levelled(
        ledger: &mut Ledger,
        samples: f64,
        variance: f64,
        now: HouseNs,
    ) -> Option<Levelled> {
        let level = Level {
            samples,
            variance,
            age_s: 0.0,
        };
        ledger.level(level, &clock(now, 0.0, 0.0, 1000.0), &still(now))
    }

    #[test]
    fn occupancy_weighs_by_the_variances() {
        let mut ledger = account();
        let now = SECOND;
        // 1 µs of 48 kHz are 0.048 samples: at the entry and now.
        ledger.advance(now, &clock(now, 0.0, 0.0, 1000.0), &still(now));
        let (phase, variance) = (ledger.phase_samples(), ledger.variance());
        let lasting = variance - 0.048 * 0.048;
        let noise = 0.01;
        let taken = levelled(&mut ledger, phase + 0.1, noise, now);
        assert_eq!(taken, Some(Levelled::Corrected));
        // What lasts and what passes are both corrected, each by its share.
        let gain = variance / (variance + noise);
        assert!((ledger.phase_samples() - phase - gain * 0.1).abs() < 1e-12);
        let left = |part: f64| part * (1.0 - part / (variance + noise));
        assert!((ledger.lasting_variance() - left(lasting)).abs() < 1e-12);
        assert!((ledger.variance() - left(lasting) - left(0.048 * 0.048)).abs() < 1e-12);
    }

    #[test]
    fn an_old_level_is_carried_on_to_now() {
        let mut ledger = account();
        ledger.advance(SECOND, &clock(SECOND, 0.0, 0.0, 1000.0), &still(SECOND));
        let phase = ledger.phase_samples();
        // Ten seconds ago it was lower by what it has gained since: no news.
        let gains = 44_100.0 * 160.0 / 147.0 * 1e-5;
        let level = Level {
            samples: phase - 10.0 * gains,
            variance: 0.01,
            age_s: 10.0,
        };
        ledger.level(level, &clock(SECOND, 1e-5, 0.0, 1000.0), &still(SECOND));
        assert!((ledger.phase_samples() - phase).abs() < 1e-9);
    }

    #[test]
    fn three_levels_at_odds_mean_that_the_buffer_was_moved() {
        let mut ledger = account();
        ledger.advance(SECOND, &clock(SECOND, 0.0, 0.0, 1000.0), &still(SECOND));
        let mut level = |samples: f64| levelled(&mut ledger, samples, 0.01, SECOND);
        // One to the other side begins the count anew.
        for samples in [7.0, -7.0, 7.0, 7.0] {
            assert_eq!(level(samples), Some(Levelled::SetAside));
        }
        assert_eq!(level(7.0), Some(Levelled::Moved));
        assert!((ledger.phase_samples() - 7.0).abs() < 1e-12);
    }
}
