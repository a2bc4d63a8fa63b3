//! The operator's hand: pins, releases, changeovers, and the record of them.

use ratewright_control::{Act, ActKind, Event, Id};
use ratewright_proto::v1::{self, act::What};

use super::names;
use crate::refused::{Refused, Violation, Violations};

/// Bytes that the name of who acts may have.
const MAX_BY: usize = 128;
/// Bytes that a note may have.
const MAX_NOTE: usize = 512;

pub(crate) fn pin(sent: v1::PinCrossingRequest) -> Result<Event, Refused> {
    let (crossing, by, note) = signed(&sent.name, sent.by, sent.note, Ok(()))?.0;
    Ok(Event::Pin { crossing, by, note })
}

pub(crate) fn release(sent: v1::ReleaseCrossingRequest) -> Result<Event, Refused> {
    let (crossing, by, note) = signed(&sent.name, sent.by, sent.note, Ok(()))?.0;
    Ok(Event::Release { crossing, by, note })
}

pub(crate) fn change_over(sent: v1::ChangeOverRequest) -> Result<Event, Refused> {
    let source = names::parse_clock("source_clock", &sent.source_clock);
    let ((crossing, by, note), source) = signed(&sent.name, sent.by, sent.note, source)?;
    Ok(Event::ChangeOver {
        crossing,
        source,
        by,
        note,
    })
}

/// What every act says, and what this one says `besides`; all that is wrong is told at once.
fn signed<T>(
    name: &str,
    by: String,
    note: String,
    besides: Result<T, Violation>,
) -> Result<((Id, String, String), T), Refused> {
    let mut violations = Violations::default();
    let crossing = violations.note(names::parse_crossing("name", name));
    let besides = violations.note(besides);
    let by = violations.note(text("by", by, 1, MAX_BY));
    let note = violations.note(text("note", note, 0, MAX_NOTE));
    violations.into_result()?;
    let missing = "a field that is missing was noted as a violation";
    let act = (
        crossing.expect(missing),
        by.expect(missing),
        note.expect(missing),
    );
    Ok((act, besides.expect(missing)))
}

fn text(field: &str, sent: String, least: usize, most: usize) -> Result<String, Violation> {
    if (least..=most).contains(&sent.len()) {
        return Ok(sent);
    }
    let accepted = format!("{least} to {most} bytes");
    Err(Violation::new(field, names::quoted(&sent), accepted))
}

/// The path of a field of the engine's event as the caller knows it.
pub(crate) fn path_of(field: &str) -> String {
    match field {
        "crossing" => "name".into(),
        "source" => "source_clock".into(),
        other => other.into(),
    }
}

pub(crate) fn act_to_wire(act: &Act) -> v1::Act {
    let what = match &act.what {
        ActKind::Pinned => What::Pinned(v1::Pinned {}),
        ActKind::Released => What::Released(v1::Released {}),
        ActKind::ChangedOver { from, to } => What::ChangedOver(v1::ChangedOver {
            from_clock: names::clock(from),
            to_clock: names::clock(to),
        }),
    };
    v1::Act {
        crossing: names::crossing(&act.crossing),
        by: act.by.clone(),
        note: act.note.clone(),
        at_ns: act.at_ns,
        what: Some(what),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_violation_is_named() {
        let sent = v1::ChangeOverRequest {
            name: "desk-to-stage".into(),
            source_clock: "spare".into(),
            by: String::new(),
            note: "ü".repeat(257),
        };
        let Refused::Invalid(violations) = change_over(sent).unwrap_err() else {
            panic!("a wrong field is a violation")
        };
        let fields: Vec<&str> = violations.iter().map(|v| v.field.as_str()).collect();
        assert_eq!(fields, ["name", "source_clock", "by", "note"]);
        assert_eq!(violations[2].value, "\"\"");
        assert_eq!(violations[2].accepted, "1 to 128 bytes");
    }

    #[test]
    fn a_note_may_be_empty_or_fill_its_bytes() {
        for note in [String::new(), "n".repeat(512)] {
            let sent = v1::PinCrossingRequest {
                name: "crossings/desk-to-stage".into(),
                by: "b".repeat(128),
                note: note.clone(),
            };
            let Ok(Event::Pin { note: taken, .. }) = pin(sent) else {
                panic!("these are within the limits")
            };
            assert_eq!(taken, note);
        }
    }
}
