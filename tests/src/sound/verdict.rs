//! What came of a performance.

use ratewright_client::{Realised, Setting};

use super::performance::{Part, Performance};
use super::recording::{PHASE_OUTPUTS, Recording};
use super::seat::handle_number;
use super::tone::{Ahead, Frequency, Spectrum, frequency, spectrum, turns_ahead};
use super::world::World;

/// How exactly the instant of effect is known in sink samples: house times are whole ns.
const INSTANT_SAMPLES: f64 = 1e-3;

/// How the settings of a part took effect.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub struct Switching {
    /// Settings that took effect, the first included.
    pub took_effect: usize,
    /// Of those, settings that changed what is run.
    pub changed: usize,
    /// At the first block end at or after the instant, by the true clocks.
    pub at_first_block_end: usize,
    /// Heard of after their instant, and run from the next block end.
    pub late: usize,
    /// Anything else: there must be none.
    pub wrong: usize,
}

impl Part {
    fn setting(&self, number: ratewright_handle::SettingNumber) -> Option<&(Setting, i64)> {
        let found = |(setting, _): &&(Setting, i64)| handle_number(setting) == number;
        self.settings.iter().find(found)
    }

    /// Judges each change by the true clocks.
    pub fn switching(&self, world: &World) -> Switching {
        let mut switching = Switching::default();
        let mut running: Option<Realised> = None;
        for change in &self.played.changes {
            let Some((setting, armed_ns)) = self.setting(change.number) else {
                switching.wrong += 1;
                continue;
            };
            switching.took_effect += 1;
            if running.replace(setting.realised) != Some(setting.realised) {
                switching.changed += 1;
            }
            let instant = world.sink.at_ns(setting.effect_ns - world.origin_ns);
            let is_early = (change.at as f64) < instant - INSTANT_SAMPLES;
            let is_first = (change.before as f64) < instant + INSTANT_SAMPLES;
            match (is_early, is_first, *armed_ns <= setting.effect_ns) {
                (false, true, _) => switching.at_first_block_end += 1,
                (false, false, false) => switching.late += 1,
                _ => switching.wrong += 1,
            }
        }
        switching
    }

    /// The frequency of each tone in house time.
    pub fn frequencies(&self) -> Vec<Frequency> {
        let recordings = &self.played.recordings;
        let tones = recordings.first().map_or(0, |r| r.tones.len());
        let of = |tone: usize| {
            let ahead: Vec<_> = recordings.iter().map(|r| r.ahead(tone)).collect();
            let hz = recordings.first().map_or(0.0, |r| r.tones[tone].0);
            frequency(hz, &ahead)
        };
        (0..tones).map(of).collect()
    }

    /// The longest recording.
    ///
    /// # Panics
    /// If nothing was recorded.
    pub fn longest(&self) -> &Recording {
        let longest = self.played.recordings.iter().max_by_key(|r| r.len());
        longest.expect("something was recorded")
    }

    /// The spectrum of a tone in the longest recording.
    ///
    /// # Panics
    /// If nothing was recorded.
    pub fn spectrum(&self, tone: usize) -> Spectrum {
        spectrum(&self.longest().tones[tone].1, 48_000.0)
    }

    /// The level of the worst spur that the settings of this part should make beside a tone, dB, from
    /// the sawtooth that the phase makes under them; `None` where it makes none.
    ///
    /// A sawtooth of p samples from peak to peak turns the tone by 2π p f/f_sink. Its fundamental has
    /// 1/π of that as amplitude, and each of the two lines which that makes half: p f/f_sink.
    pub fn sawtooth_spur_db(&self, hz: f64) -> Option<f64> {
        let sawtooths = self
            .settings
            .iter()
            .map(|(setting, _)| sawtooth_samples(&setting.realised));
        let worst = sawtooths.fold(0.0, f64::max);
        (worst > 0.0).then(|| 20.0 * libm::log10(worst * hz / 48_000.0))
    }

    /// The most that the daemon's account was off by, sink samples: the truth is the middle of what
    /// the phase error was within the slot.
    pub fn worst_account(&self, world: &World) -> f64 {
        let slots = &self.played.slots;
        let first = slots
            .first()
            .map_or(0, |slot| world.slot_at(world.origin_ns + slot.at_ns));
        let off = |&(house_ns, account): &(i64, f64)| {
            let slot = world.slot_at(house_ns).checked_sub(first)?;
            let phase = slots.get(slot)?.phase;
            Some((account - (phase.least + phase.most) / 2.0).abs())
        };
        self.account.iter().filter_map(off).fold(0.0, f64::max)
    }

    /// The largest magnitude of the true phase error, sink samples.
    pub fn worst_phase(&self) -> f64 {
        let phase = &self.played.phase;
        phase.most.max(-phase.least)
    }
}

/// The sawtooth that the phase makes under a setting, peak to peak in sink samples: a phase of a table
/// that is stepped through; or of a cadence of a/b < c/d, which goes up by bc − ad parts in b or d
/// with each block of one and down with the other, one more than fits at most.
fn sawtooth_samples(realised: &Realised) -> f64 {
    match realised {
        Realised::Stepping(stepping) => {
            let wanted = stepping.wanted();
            *wanted.numer() as f64 / *wanted.denom() as f64 / stepping.phases() as f64
        }
        Realised::Cadence(cadence) => {
            let (low, high) = (cadence.low(), cadence.high());
            let across = high.numer() * low.denom() - low.numer() * high.denom();
            across as f64 / *low.denom().min(high.denom()) as f64
        }
        Realised::Single(_) | Realised::Lazy { .. } => 0.0,
    }
}

impl Recording {
    /// Outputs.
    pub fn len(&self) -> usize {
        self.tones.first().map_or(0, |(_, outputs)| outputs.len())
    }

    /// Whether there is nothing in it.
    pub fn is_empty(&self) -> bool {
        self.len() == 0
    }

    /// How far a tone was ahead, from the first samples of this.
    fn ahead(&self, tone: usize) -> Ahead {
        let (hz, samples) = &self.tones[tone];
        let (samples, played) = (&samples[..PHASE_OUTPUTS], &self.played[..PHASE_OUTPUTS]);
        Ahead {
            at_s: played[PHASE_OUTPUTS / 2].ns() * 1e-9,
            turns: turns_ahead(samples, played, *hz),
        }
    }
}

impl Performance {
    /// The most that the average over the stream can be off by, 10⁻⁹, however the phase error
    /// moves within the headroom: twice the headroom over the samples of that time.
    pub fn limit_ppb(headroom_samples: f64, over_s: f64) -> f64 {
        2.0 * headroom_samples / (48_000.0 * over_s) * 1e9
    }
}
