//! The settings that the audio thread knows of: those that wait for their instant, and the newest.

use crate::SettingNumber;
use crate::cells::Words;
use crate::plan::{PLAN_WORDS, Plan};

/// Settings that can wait at a time.
pub(crate) const ENTRIES: usize = 4;

const ENTRY_WORDS: usize = PLAN_WORDS + 5;

/// Words of a table.
pub(crate) const TABLE_WORDS: usize = ENTRIES * ENTRY_WORDS;

/// Which setting, and how often its average was trimmed: what is greater is newer.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, PartialOrd, Ord)]
pub(crate) struct Version {
    pub(crate) epoch: u64,
    pub(crate) number: u64,
    pub(crate) trims: u64,
}

impl Version {
    pub(crate) fn of(number: SettingNumber) -> Self {
        Self {
            epoch: number.epoch,
            number: number.number,
            trims: 0,
        }
    }

    pub(crate) fn setting(&self) -> SettingNumber {
        SettingNumber {
            epoch: self.epoch,
            number: self.number,
        }
    }
}

/// One setting.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub(crate) struct Entry {
    pub(crate) version: Version,
    pub(crate) effect_ns: i64,
    pub(crate) expiry_ns: i64,
    pub(crate) plan: Plan,
}

/// Up to four settings, oldest first; places without one have an empty plan.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub(crate) struct Table([Entry; ENTRIES]);

impl Table {
    /// The settings.
    pub(crate) fn entries(&self) -> impl Iterator<Item = &Entry> {
        self.0.iter().filter(|entry| !entry.plan.is_empty())
    }

    /// The newest.
    pub(crate) fn newest(&self) -> Option<&Entry> {
        self.entries().last()
    }

    /// Appends a newer one. If there is no room, the oldest goes.
    pub(crate) fn push(&mut self, entry: Entry) {
        let used = self.entries().count();
        if used == ENTRIES {
            self.0.rotate_left(1);
        }
        self.0[used.min(ENTRIES - 1)] = entry;
    }

    /// Puts another in place of the newest.
    pub(crate) fn replace_newest(&mut self, entry: Entry) {
        let used = self.entries().count();
        self.0[used.saturating_sub(1)] = entry;
    }
}

impl Words<TABLE_WORDS> for Table {
    fn to_words(&self) -> [u64; TABLE_WORDS] {
        let mut words = [0; TABLE_WORDS];
        for (place, entry) in words.chunks_exact_mut(ENTRY_WORDS).zip(&self.0) {
            let Version {
                epoch,
                number,
                trims,
            } = entry.version;
            let head = [
                epoch,
                number,
                trims,
                entry.effect_ns.cast_unsigned(),
                entry.expiry_ns.cast_unsigned(),
            ];
            place[..5].copy_from_slice(&head);
            place[5..].copy_from_slice(&entry.plan.0);
        }
        words
    }

    fn from_words(words: [u64; TABLE_WORDS]) -> Self {
        let mut table = Self::default();
        for (place, entry) in words.chunks_exact(ENTRY_WORDS).zip(&mut table.0) {
            entry.version = Version {
                epoch: place[0],
                number: place[1],
                trims: place[2],
            };
            entry.effect_ns = place[3].cast_signed();
            entry.expiry_ns = place[4].cast_signed();
            entry.plan.0.copy_from_slice(&place[5..]);
        }
        table
    }
}

#[cfg(all(test, not(loom)))]
mod tests {
    use super::*;
    use crate::Realised;
    use ratewright_ratio::Fraction;

    fn entry(number: u64) -> Entry {
        Entry {
            version: Version::of(SettingNumber { epoch: 1, number }),
            effect_ns: -3,
            expiry_ns: i64::MAX,
            plan: Plan::new(&Realised::Single(Fraction::new(number, 7))).expect("no swing"),
        }
    }

    #[test]
    fn the_oldest_makes_room_and_words_give_the_table_back() {
        let mut table = Table::default();
        assert_eq!(table.newest(), None);
        for number in 1..=6 {
            table.push(entry(number));
            assert_eq!(table.newest(), Some(&entry(number)));
            assert_eq!(Table::from_words(table.to_words()), table);
        }
        let numbers: Vec<u64> = table.entries().map(|e| e.version.number).collect();
        assert_eq!(numbers, [3, 4, 5, 6]);
        table.replace_newest(entry(9));
        let numbers: Vec<u64> = table.entries().map(|e| e.version.number).collect();
        assert_eq!(numbers, [3, 4, 5, 9]);
    }
}
