//! Levels: what a follower has measured of its buffer corrects the account, or is at odds with it.

use serde::{Deserialize, Serialize};

use super::Ledger;
use crate::HouseNs;
use crate::clocks::Traced;
use crate::heard::{Heard, Moments};
use crate::heed::{Contest, Verdict};

/// An occupancy further off than so many standard deviations is at odds with the account.
const AT_ODDS: f64 = 5.0;
/// So many in a row mean that the buffer was moved.
const AT_ODDS_IN_A_ROW: u32 = 3;

/// What a follower has measured of its buffer.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(crate) struct Level {
    /// From the centre.
    pub(crate) samples: f64,
    pub(crate) variance: f64,
    /// How long ago it was.
    pub(crate) age_s: f64,
}

/// Levels at odds with the account.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub(super) struct AtOdds {
    count: u32,
    /// The first of them was off by so much, at that time.
    first: f64,
    since_ns: HouseNs,
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
    /// The same, and the levels run away from it: the readings are not believed.
    Contradicted,
    /// It has decided that the newest setting does not run.
    NotHeeded,
    /// It has decided that the newest setting, which did not run, now does.
    TakenUp,
}

impl Ledger {
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
            return self.at_odds(innovation, (level.variance, whole), source, sink);
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
        self.at_odds = None;
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
        if is_unheeded {
            contest.align(innovation, more);
        }
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

    /// A level was off by `innovation`, whose variance is `whole`. Three in a row to one side decide:
    /// a step is that of a buffer that was moved; what runs away is a drift that the readings do not
    /// show.
    fn at_odds(
        &mut self,
        innovation: f64,
        (variance, whole): (f64, f64),
        source: &Traced,
        sink: &Traced,
    ) -> Option<Levelled> {
        let at_ns = self.at_ns?;
        let begun = || {
            Box::new(AtOdds {
                count: 0,
                first: innovation,
                since_ns: at_ns,
            })
        };
        let before = self.at_odds.take();
        let mut odds = before
            .filter(|odds| odds.first * innovation > 0.0)
            .unwrap_or_else(begun);
        odds.count += 1;
        if odds.count < AT_ODDS_IN_A_ROW {
            self.at_odds = Some(odds);
            return Some(Levelled::SetAside);
        }
        let (ran, seconds) = (
            innovation - odds.first,
            (at_ns - odds.since_ns) as f64 * 1e-9,
        );
        self.contest = None;
        if seconds > 0.0 && ran * ran > 2.0 * AT_ODDS * AT_ODDS * whole {
            let begun = || Box::new(Heard::begin(Moments::of(source, sink, self.sink_hz)));
            let heard = self.heard.get_or_insert_with(begun);
            heard.contradict(innovation, ran / seconds, variance, seconds);
            return Some(Levelled::Contradicted);
        }
        self.centred_ns = at_ns;
        self.phase_samples += innovation;
        self.offset_variance = variance;
        self.left_variance = 0.0;
        self.source.sharpen(0.0);
        self.sink.sharpen(0.0);
        Some(Levelled::Moved)
    }
}

#[cfg(test)]
mod tests {
    use super::super::tests::{SECOND, account, clock, still};
    use super::*;

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
