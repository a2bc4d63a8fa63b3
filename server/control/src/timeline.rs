//! What was in force when: the ratios of a crossing with the instants of their effect.

use num_rational::Ratio;
use ratewright_ratio::Fraction;
use serde::{Deserialize, Serialize};

use crate::HouseNs;

/// Settings kept, and more only while they wait for their effect; a report of an older one is
/// refused.
pub(crate) const KEPT: usize = 4;

/// One setting's place in the timeline.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) struct Entry {
    pub(crate) epoch: u64,
    pub(crate) number: u64,
    /// The average ratio it makes.
    pub(crate) ratio: Fraction,
    /// When it was decided: it cannot have taken effect before.
    pub(crate) decided_ns: HouseNs,
    /// When it takes effect: as planned, then as reported.
    pub(crate) effect_ns: HouseNs,
    /// True once that was reported.
    pub(crate) is_reported: bool,
}

/// A stretch of time under one ratio.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(crate) struct Stretch {
    pub(crate) ratio: f64,
    pub(crate) from_ns: HouseNs,
    pub(crate) to_ns: HouseNs,
}

/// Two ratios, either of which may run.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(crate) struct Rival {
    /// The one that is taken to run.
    pub(crate) runs: f64,
    /// The other: that of the newest setting, if it is not heeded, else the one before.
    pub(crate) other: f64,
    /// Since when the two accounts go apart.
    pub(crate) since_ns: HouseNs,
}

/// The last settings, in the order of their effect; before the first that counts nothing runs.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub(crate) struct Timeline {
    entries: Vec<Entry>,
    /// Older ones are gone: the first that is kept tells only what ran before the second.
    has_forgotten: bool,
    /// Settings below this number were for another stream. Their followers may still report them.
    counts_from: u64,
    /// Highest number of this stream that is known to run or to have run.
    known: u64,
    /// The follower reports what it applies.
    is_reported: bool,
    /// Settings from this number on are not run, though they should be; 0 if there are none.
    unheeded_from: u64,
}

/// A ratio as the nearest double.
pub(crate) fn as_double(ratio: &Ratio<u64>) -> f64 {
    *ratio.numer() as f64 / *ratio.denom() as f64
}

impl Timeline {
    /// Adds a setting; its effect is not before that of the one before.
    pub(crate) fn push(&mut self, entry: Entry) {
        // What is in force when the entry is decided is kept, and what comes after it.
        let is_past = |next: &Entry| next.effect_ns <= entry.decided_ns;
        if self.entries.len() > KEPT && self.unheeded_from > 0 {
            // What truly runs is kept; the one before this was never run, and is replaced.
            self.entries.pop();
        } else if self.entries.len() > KEPT && self.entries.get(1).is_some_and(is_past) {
            self.entries.remove(0);
            self.has_forgotten = true;
        }
        if self.entries.is_empty() {
            self.entries.reserve_exact(KEPT + 1);
        }
        self.entries.push(entry);
    }

    /// The stream begins anew with the setting of this number.
    pub(crate) fn begin_with(&mut self, number: u64) {
        self.counts_from = number;
        (self.known, self.is_reported, self.unheeded_from) = (0, false, 0);
    }

    /// The settings of this stream, but those that are not heeded.
    fn counting(&self) -> &[Entry] {
        let below = |number: u64| self.entries.partition_point(|entry| entry.number < number);
        let begin = below(self.counts_from);
        match self.unheeded_from {
            0 => &self.entries[begin..],
            number => &self.entries[begin..below(number).max(begin)],
        }
    }

    /// The newest setting, if it is not run though it should be.
    pub(crate) fn unheeded(&self) -> Option<&Entry> {
        self.entries.last().filter(|_| self.unheeded_from > 0)
    }

    /// What else may run at `now` than the account has it; `None` if that is certain.
    pub(crate) fn rival(&self, now: HouseNs) -> Option<Rival> {
        let newest = self
            .entries
            .last()
            .filter(|newest| newest.effect_ns <= now)?;
        let counting = self.counting();
        let rival = |runs: &Entry, other: &Entry, since_ns| Rival {
            runs: as_double(&runs.ratio),
            other: as_double(&other.ratio),
            since_ns,
        };
        if self.unheeded_from > 0 {
            let runs = counting.last()?;
            return (runs.ratio != newest.ratio).then(|| rival(runs, newest, now));
        }
        // Renewals go on with the ratio of the one that they renew.
        let is_other = |entry: &Entry| entry.ratio != newest.ratio;
        let before = counting.iter().rposition(is_other)?;
        let first = &counting[before + 1];
        (self.known < first.number).then(|| rival(newest, &counting[before], first.effect_ns))
    }

    /// True if the follower has reported settings of this stream, so that it is expected to go on.
    pub(crate) fn is_reported(&self) -> bool {
        self.is_reported
    }

    /// The follower has reported a setting.
    pub(crate) fn reported(&mut self, number: u64) {
        self.is_reported |= number >= self.counts_from;
    }

    /// The newest setting runs for certain.
    pub(crate) fn confirm_newest(&mut self) {
        self.known = self
            .entries
            .last()
            .map_or(self.known, |newest| newest.number);
    }

    /// The newest setting is not run.
    pub(crate) fn give_up_newest(&mut self) {
        self.unheeded_from = self.entries.last().map_or(0, |newest| newest.number);
    }

    /// The newest setting is run since then.
    pub(crate) fn take_up_newest(&mut self, since_ns: HouseNs) {
        if let Some(number) = self.entries.last().map(|newest| newest.number) {
            self.take_up(number);
            self.move_effect(self.entries.len() - 1, since_ns);
        }
    }

    /// The setting of this number is run after all; what was not heeded before it never ran.
    fn take_up(&mut self, number: u64) {
        if number >= self.counts_from {
            self.known = self.known.max(number);
        }
        if self.unheeded_from > 0 && number >= self.unheeded_from {
            let from = self.unheeded_from;
            self.entries
                .retain(|entry| !(from..number).contains(&entry.number));
            self.unheeded_from = 0;
        }
    }

    /// Effect of the newest setting.
    pub(crate) fn last_effect_ns(&self) -> Option<HouseNs> {
        self.entries.last().map(|entry| entry.effect_ns)
    }

    /// When the stream began, as far back as is kept.
    pub(crate) fn begins_ns(&self) -> Option<HouseNs> {
        self.counting().first().map(|entry| entry.effect_ns)
    }

    /// The ratio that runs after all changes.
    pub(crate) fn last_ratio(&self) -> Option<f64> {
        self.counting().last().map(|entry| as_double(&entry.ratio))
    }

    /// The ratio in force at an instant; the first one before it began.
    pub(crate) fn ratio_at(&self, at_ns: HouseNs) -> Option<f64> {
        let entries = self.counting();
        let in_force = entries.iter().rev().find(|entry| entry.effect_ns <= at_ns);
        in_force
            .or(entries.first())
            .map(|entry| as_double(&entry.ratio))
    }

    /// The stretches between two instants.
    pub(crate) fn stretches(
        &self,
        from_ns: HouseNs,
        to_ns: HouseNs,
    ) -> impl Iterator<Item = Stretch> {
        let entries = self.counting();
        let ends = entries
            .iter()
            .skip(1)
            .map(|next| next.effect_ns)
            .chain([HouseNs::MAX]);
        entries.iter().zip(ends).filter_map(move |(entry, end_ns)| {
            let (from_ns, to_ns) = (entry.effect_ns.max(from_ns), end_ns.min(to_ns));
            (from_ns < to_ns).then(|| Stretch {
                ratio: as_double(&entry.ratio),
                from_ns,
                to_ns,
            })
        })
    }

    /// The setting with this number, if it is kept.
    pub(crate) fn entry(&self, epoch: u64, number: u64) -> Option<&Entry> {
        let mut known = self.entries.iter().skip(usize::from(self.has_forgotten));
        known.find(|entry| entry.number == number && entry.epoch == epoch)
    }

    /// Moves the effect of a setting to where it truly was, but not before the one before. Those
    /// that were planned to follow it sooner cannot have: they follow at once, until they are
    /// reported themselves. Gives the first instant that this concerns, if the setting counts.
    ///
    /// The first report stands: another one comes from a player that was started again and took up
    /// what ran before.
    pub(crate) fn correct(&mut self, number: u64, truly_ns: HouseNs) -> Option<HouseNs> {
        self.take_up(number);
        let counts = |entry: &Entry| entry.number == number && number >= self.counts_from;
        let index = self.entries.iter().position(counts)?;
        if std::mem::replace(&mut self.entries[index].is_reported, true) {
            return None;
        }
        Some(self.move_effect(index, truly_ns))
    }

    /// Moves the effect of the setting at a place; gives the first instant that this concerns.
    fn move_effect(&mut self, index: usize, truly_ns: HouseNs) -> HouseNs {
        let previous = index.checked_sub(1).map(|i| self.entries[i]);
        let previous = previous.filter(|entry| entry.number >= self.counts_from);
        let earliest_ns = previous.map_or(HouseNs::MIN, |entry| entry.effect_ns);
        let truly_ns = truly_ns.max(earliest_ns);
        let assumed_ns = std::mem::replace(&mut self.entries[index].effect_ns, truly_ns);
        for later in &mut self.entries[index + 1..] {
            later.effect_ns = later.effect_ns.max(truly_ns);
        }
        assumed_ns.min(truly_ns)
    }
}
