//! Never an older setting after a newer one.

use std::collections::BTreeMap;

use crate::wire::setting_name;
use crate::{Id, SettingNumber};

/// The newest setting handed on, per crossing.
#[derive(Debug, Default)]
pub(crate) struct Newest(BTreeMap<Id, SettingNumber>);

impl Newest {
    /// True if `number` is newer than all before it for the crossing.
    pub(crate) fn is_newer(&self, crossing: &Id, number: SettingNumber) -> bool {
        self.0.get(crossing).is_none_or(|newest| number > *newest)
    }

    /// The newest handed on for a crossing.
    pub(crate) fn of(&self, crossing: &Id) -> Option<SettingNumber> {
        self.0.get(crossing).copied()
    }

    /// The names of the settings handed on, from which a stream may be resumed.
    pub(crate) fn names(&self) -> Vec<String> {
        let name =
            |(crossing, number): (&Id, &SettingNumber)| setting_name(crossing, Some(*number));
        self.0.iter().map(name).collect()
    }

    /// Remembers a setting that was handed on. Older ones leave no mark.
    pub(crate) fn handed_on(&mut self, crossing: &Id, number: SettingNumber) {
        if self.is_newer(crossing, number) {
            self.0.insert(crossing.clone(), number);
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_new_epoch_is_newer_whatever_its_number() {
        let crossing = Id::new("a").expect("an id");
        let other = Id::new("b").expect("an id");
        let number = |epoch, number| SettingNumber { epoch, number };
        let mut newest = Newest::default();
        newest.handed_on(&crossing, number(1, 7));
        newest.handed_on(&crossing, number(1, 3));
        assert!(!newest.is_newer(&crossing, number(1, 6)));
        assert!(
            !newest.is_newer(&crossing, number(1, 7)),
            "the same again is not newer"
        );
        assert!(newest.is_newer(&crossing, number(2, 1)));
        assert!(newest.is_newer(&other, number(1, 1)), "crossings are apart");
    }
}
