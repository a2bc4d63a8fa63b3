//! Resource names: `clocks/{id}`, `crossings/{id}`, `crossings/{id}/settings/{epoch}-{number}`.

use ratewright_control::{Id, Reference, Setting};

use crate::refused::Violation;

const ID: &str = "an id is 1 to 63 of a-z, 0-9 and '-', starting with a letter";

pub(crate) fn clock(id: &Id) -> String {
    format!("clocks/{id}")
}

pub(crate) fn crossing(id: &Id) -> String {
    format!("crossings/{id}")
}

pub(crate) fn setting(setting: &Setting) -> String {
    format!(
        "crossings/{}/settings/{}-{}",
        setting.crossing, setting.epoch, setting.number
    )
}

pub(crate) fn reference(reference: &Reference) -> String {
    match reference {
        Reference::House => "house".into(),
        Reference::Clock(id) => clock(id),
    }
}

/// The setting that a call names.
#[derive(Clone, Debug, PartialEq, Eq)]
pub(crate) struct SettingName {
    pub(crate) crossing: Id,
    /// Epoch and number; absent for the newest one.
    pub(crate) numbered: Option<(u64, u64)>,
}

impl std::fmt::Display for SettingName {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        match self.numbered {
            Some((epoch, number)) => {
                write!(f, "crossings/{}/settings/{epoch}-{number}", self.crossing)
            }
            None => write!(f, "crossings/{}/settings/latest", self.crossing),
        }
    }
}

pub(crate) fn parse_id(field: &str, sent: &str) -> Result<Id, Violation> {
    Id::new(sent).map_err(|_| Violation::new(field, quoted(sent), ID))
}

pub(crate) fn parse_clock(field: &str, sent: &str) -> Result<Id, Violation> {
    parse_in("clocks", field, sent)
}

pub(crate) fn parse_crossing(field: &str, sent: &str) -> Result<Id, Violation> {
    parse_in("crossings", field, sent)
}

pub(crate) fn parse_reference(field: &str, sent: &str) -> Result<Reference, Violation> {
    if sent == "house" {
        return Ok(Reference::House);
    }
    let accepted = format!("'house' or 'clocks/{{id}}'; {ID}");
    parse_clock(field, sent)
        .map(Reference::Clock)
        .map_err(|violation| Violation {
            accepted,
            ..violation
        })
}

/// A setting's name; `latest` in place of the numbers means the newest.
pub(crate) fn parse_setting(field: &str, sent: &str) -> Result<SettingName, Violation> {
    let violation = || {
        let accepted = "crossings/{id}/settings/{epoch}-{number} or crossings/{id}/settings/latest";
        Violation::new(field, quoted(sent), accepted)
    };
    let (parent, last) = sent.split_once("/settings/").ok_or_else(violation)?;
    let crossing = parse_crossing(field, parent).map_err(|_| violation())?;
    if last == "latest" {
        return Ok(SettingName {
            crossing,
            numbered: None,
        });
    }
    let (epoch, number) = last.split_once('-').ok_or_else(violation)?;
    // The store counts in 63 bits, and so does everything that was ever numbered.
    let parse = |digits: &str| match digits.parse::<i64>() {
        Ok(number) if number >= 0 => Ok(number as u64),
        _ => Err(violation()),
    };
    Ok(SettingName {
        crossing,
        numbered: Some((parse(epoch)?, parse(number)?)),
    })
}

fn parse_in(collection: &str, field: &str, sent: &str) -> Result<Id, Violation> {
    sent.strip_prefix(collection)
        .and_then(|rest| rest.strip_prefix('/'))
        .and_then(|id| Id::new(id).ok())
        .ok_or_else(|| Violation::new(field, quoted(sent), format!("'{collection}/{{id}}'; {ID}")))
}

/// A text as a message shows it, so that an empty one can be seen.
pub(crate) fn quoted(sent: &str) -> String {
    format!("{sent:?}")
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn names_are_read_back() {
        let id = Id::new("studio-a").unwrap();
        assert_eq!(parse_clock("name", &clock(&id)), Ok(id.clone()));
        assert_eq!(parse_crossing("name", &crossing(&id)), Ok(id.clone()));
        assert_eq!(parse_reference("r", "house"), Ok(Reference::House));
        assert_eq!(
            parse_reference("r", "clocks/studio-a"),
            Ok(Reference::Clock(id.clone()))
        );
        for text in [
            "crossings/studio-a/settings/3-17",
            "crossings/studio-a/settings/latest",
        ] {
            assert_eq!(parse_setting("name", text).unwrap().to_string(), text);
        }
    }

    #[test]
    fn a_wrong_name_is_shown_with_its_field() {
        for sent in [
            "",
            "clocks/",
            "clocks/Studio",
            "clock/a",
            "crossings/a",
            "clocksa",
        ] {
            let violation = parse_clock("clock.name", sent).unwrap_err();
            assert_eq!(violation.field, "clock.name");
            assert_eq!(violation.value, format!("{sent:?}"));
            assert!(violation.accepted.contains("clocks/{id}"));
        }
        for sent in [
            "crossings/a",
            "crossings/a/settings/1",
            "crossings/a/settings/-1-2",
            "x/settings/1-1",
        ] {
            assert!(parse_setting("name", sent).is_err(), "{sent}");
        }
    }
}
