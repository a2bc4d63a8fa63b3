//! Crossings and their status.

use prost::Message as _;
use ratewright_control::{
    CrossingDeclaration, CrossingState, DEFAULT_PITCH_LIMIT_PPM, Id, Pin, Realisation,
};
use ratewright_proto::v1;
use ratewright_ratio::Bounds;

use super::{clock::display_name, names, setting};
use crate::{
    board::CrossingView,
    digest,
    refused::{Refused, Violation, Violations},
};

/// Fields of a crossing that an update may change.
pub(crate) const FIELDS: [&str; 14] = [
    "display_name",
    "source_clock",
    "sink_clock",
    "max_l",
    "max_m",
    "headroom_samples",
    "realisation",
    "group",
    "lead_ns",
    "review_horizon_ns",
    "least_hold_ns",
    "pitch_limit_ppm",
    "silent",
    "backup_clock",
];

const MAX_BOUND: u64 = 1 << 31;
const SECOND_NS: i64 = 1_000_000_000;

/// A declaration out of the field `field` of a request.
pub(crate) fn declaration(
    field: &str,
    sent: Option<v1::Crossing>,
) -> Result<CrossingDeclaration, Refused> {
    let Some(sent) = sent else {
        return Err(Violation::new(field, "absent", "a crossing").into());
    };
    let at = |name: &str| format!("{field}.{name}");
    let mut violations = Violations::default();
    let id = violations.note(names::parse_crossing(&at("name"), &sent.name));
    let display_name = violations.note(display_name(&at("display_name"), sent.display_name));
    let source = violations.note(names::parse_clock(&at("source_clock"), &sent.source_clock));
    let sink = violations.note(names::parse_clock(&at("sink_clock"), &sent.sink_clock));
    let max_l = violations.note(bound(&at("max_l"), sent.max_l));
    let max_m = violations.note(bound(&at("max_m"), sent.max_m));
    let headroom_samples =
        violations.note(headroom(&at("headroom_samples"), sent.headroom_samples));
    let realisation = violations.note(realisation(&at("realisation"), sent.realisation));
    let group = violations.note(group(&at("group"), &sent.group));
    let lead_ns = violations.note(lead(&at("lead_ns"), sent.lead_ns));
    let review_horizon_ns = violations.note(review_horizon(
        &at("review_horizon_ns"),
        sent.review_horizon_ns,
    ));
    let least_hold_ns = violations.note(least_hold(&at("least_hold_ns"), sent.least_hold_ns));
    let pitch_limit_ppm =
        violations.note(pitch_limit(&at("pitch_limit_ppm"), sent.pitch_limit_ppm));
    let backup = violations.note(backup(&at("backup_clock"), &sent.backup_clock));
    violations.into_result()?;
    let missing = "a field that is missing was noted as a violation";
    let bounds = Bounds::new(max_l.expect(missing), max_m.expect(missing))
        .expect("2^31 is within what the ratio crate takes");
    let (source, sink) = (source.expect(missing), sink.expect(missing));
    Ok(CrossingDeclaration {
        display_name: display_name.expect(missing),
        headroom_samples: headroom_samples.expect(missing),
        realisation: realisation.expect(missing),
        group: group.expect(missing),
        lead_ns: lead_ns.expect(missing),
        review_horizon_ns: review_horizon_ns.expect(missing),
        least_hold_ns: least_hold_ns.expect(missing),
        pitch_limit_ppm: pitch_limit_ppm.expect(missing),
        silent: sent.silent,
        backup: backup.expect(missing),
        ..CrossingDeclaration::new(id.expect(missing), source, sink, bounds)
    })
}

/// The path of a field of the engine's declaration as the caller knows it.
pub(crate) fn path_of(field: &str) -> String {
    match field {
        "id" => "crossing.name".into(),
        "source" | "sink" | "backup" => format!("crossing.{field}_clock"),
        other => format!("crossing.{other}"),
    }
}

fn bound(field: &str, sent: u64) -> Result<u64, Violation> {
    if (1..=MAX_BOUND).contains(&sent) {
        Ok(sent)
    } else {
        Err(Violation::new(field, sent, format!("1 to {MAX_BOUND}")))
    }
}

fn headroom(field: &str, sent: f64) -> Result<f64, Violation> {
    if sent == 0.0 {
        Ok(1.0)
    } else if sent > 0.0 && sent <= 1e9 {
        Ok(sent)
    } else {
        Err(Violation::new(
            field,
            sent,
            "above 0 to 10^9 sink samples, or 0 for 1",
        ))
    }
}

fn realisation(field: &str, sent: i32) -> Result<Realisation, Violation> {
    match v1::Realisation::try_from(sent) {
        Ok(v1::Realisation::Unspecified | v1::Realisation::Cadence) => Ok(Realisation::Cadence),
        Ok(v1::Realisation::Single) => Ok(Realisation::Single),
        Ok(v1::Realisation::Stepping) => Ok(Realisation::Stepping),
        Ok(v1::Realisation::Lazy) => Ok(Realisation::Lazy),
        Err(_) => {
            let accepted = "REALISATION_SINGLE (1), REALISATION_CADENCE (2), REALISATION_STEPPING (3), \
                            REALISATION_LAZY (4), or 0 for a cadence";
            Err(Violation::new(field, sent, accepted))
        }
    }
}

fn group(field: &str, sent: &str) -> Result<Option<Id>, Violation> {
    if sent.is_empty() {
        Ok(None)
    } else {
        names::parse_id(field, sent).map(Some)
    }
}

fn lead(field: &str, sent: i64) -> Result<i64, Violation> {
    match sent {
        0 => Ok(SECOND_NS),
        1_000_000..=60_000_000_000 => Ok(sent),
        _ => Err(Violation::new(
            field,
            sent,
            "10^6 (1 ms) to 6*10^10 (60 s), or 0 for 1 s",
        )),
    }
}

fn review_horizon(field: &str, sent: i64) -> Result<i64, Violation> {
    const DAY_NS: i64 = 86_400 * SECOND_NS;
    if sent == 0 {
        Ok(DAY_NS)
    } else if (10 * SECOND_NS..=30 * DAY_NS).contains(&sent) {
        Ok(sent)
    } else {
        let accepted = "10^10 (10 s) to 2592*10^12 (30 days), or 0 for 24 h";
        Err(Violation::new(field, sent, accepted))
    }
}

fn least_hold(field: &str, sent: i64) -> Result<i64, Violation> {
    if (0..=3_600 * SECOND_NS).contains(&sent) {
        Ok(sent)
    } else {
        let accepted = "0 (none) to 36*10^11 (1 h)";
        Err(Violation::new(field, sent, accepted))
    }
}

fn pitch_limit(field: &str, sent: f64) -> Result<f64, Violation> {
    if sent == 0.0 {
        Ok(DEFAULT_PITCH_LIMIT_PPM)
    } else if (0.1..=1000.0).contains(&sent) {
        Ok(sent)
    } else {
        let accepted = format!("0.1 to 1000 ppm, or 0 for {DEFAULT_PITCH_LIMIT_PPM}");
        Err(Violation::new(field, sent, accepted))
    }
}

fn backup(field: &str, sent: &str) -> Result<Option<Id>, Violation> {
    if sent.is_empty() {
        Ok(None)
    } else {
        names::parse_clock(field, sent).map(Some)
    }
}

/// The declaration alone, as it is stored.
pub(crate) fn declaration_to_wire(crossing: &CrossingDeclaration) -> v1::Crossing {
    let realisation = match crossing.realisation {
        Realisation::Single => v1::Realisation::Single,
        Realisation::Cadence => v1::Realisation::Cadence,
        Realisation::Stepping => v1::Realisation::Stepping,
        Realisation::Lazy => v1::Realisation::Lazy,
    };
    v1::Crossing {
        name: names::crossing(&crossing.id),
        display_name: crossing.display_name.clone(),
        source_clock: names::clock(&crossing.source),
        sink_clock: names::clock(&crossing.sink),
        max_l: crossing.bounds.max_l(),
        max_m: crossing.bounds.max_m(),
        headroom_samples: crossing.headroom_samples,
        realisation: realisation.into(),
        group: crossing
            .group
            .as_ref()
            .map_or_else(String::new, ToString::to_string),
        lead_ns: crossing.lead_ns,
        review_horizon_ns: crossing.review_horizon_ns,
        least_hold_ns: crossing.least_hold_ns,
        pitch_limit_ppm: crossing.pitch_limit_ppm,
        silent: crossing.silent,
        backup_clock: crossing
            .backup
            .as_ref()
            .map_or_else(String::new, names::clock),
        status: None,
        etag: String::new(),
    }
}

pub(crate) fn view_to_wire(view: &CrossingView) -> v1::Crossing {
    let status = Some(status_to_wire(view));
    v1::Crossing {
        status,
        etag: etag(&view.declaration),
        ..declaration_to_wire(&view.declaration)
    }
}

/// The etag of a declaration: the same for the same content.
pub(crate) fn etag(crossing: &CrossingDeclaration) -> String {
    format!(
        "{:016x}",
        digest::fnv1a(&declaration_to_wire(crossing).encode_to_vec())
    )
}

fn status_to_wire(view: &CrossingView) -> v1::CrossingStatus {
    let status = &view.status;
    v1::CrossingStatus {
        state: state_to_wire(status.state).into(),
        reason: status.reason.clone(),
        as_of_ns: view.as_of_ns,
        target: status.target,
        target_low: status.target_low,
        target_high: status.target_high,
        phase_error_samples: status.phase_error_samples,
        phase_deviation_samples: status.phase_deviation_samples,
        seconds_to_slip: status.seconds_to_slip,
        seconds_vouched: status.seconds_vouched,
        setting: status.setting.as_ref().map(setting::setting_to_wire),
        settings_made: status.settings_made,
        residual: status.residual.unwrap_or(0.0),
        pin: status.pin.as_ref().map(pin_to_wire),
        source_clock: names::clock(&status.source),
        needed: status.needed.as_ref().map(|bounds| v1::Bounds {
            max_l: bounds.max_l(),
            max_m: bounds.max_m(),
        }),
    }
}

fn pin_to_wire(pin: &Pin) -> v1::Pin {
    v1::Pin {
        by: pin.by.clone(),
        since_ns: pin.since_ns,
        note: pin.note.clone(),
    }
}

fn state_to_wire(state: CrossingState) -> v1::CrossingState {
    match state {
        CrossingState::Waiting => v1::CrossingState::Waiting,
        CrossingState::Holding => v1::CrossingState::Holding,
        CrossingState::Degraded => v1::CrossingState::Degraded,
        CrossingState::OutOfBounds => v1::CrossingState::OutOfBounds,
    }
}

/// `current` with the fields of `new` that `paths` name.
pub(crate) fn overlay(
    mut current: v1::Crossing,
    new: v1::Crossing,
    paths: &[&str],
) -> v1::Crossing {
    for path in paths {
        match *path {
            "display_name" => current.display_name = new.display_name.clone(),
            "source_clock" => current.source_clock = new.source_clock.clone(),
            "sink_clock" => current.sink_clock = new.sink_clock.clone(),
            "max_l" => current.max_l = new.max_l,
            "max_m" => current.max_m = new.max_m,
            "headroom_samples" => current.headroom_samples = new.headroom_samples,
            "realisation" => current.realisation = new.realisation,
            "group" => current.group = new.group.clone(),
            "lead_ns" => current.lead_ns = new.lead_ns,
            "review_horizon_ns" => current.review_horizon_ns = new.review_horizon_ns,
            "least_hold_ns" => current.least_hold_ns = new.least_hold_ns,
            "pitch_limit_ppm" => current.pitch_limit_ppm = new.pitch_limit_ppm,
            "silent" => current.silent = new.silent,
            "backup_clock" => current.backup_clock = new.backup_clock.clone(),
            other => unreachable!("{other} is not among FIELDS"),
        }
    }
    current
}

#[cfg(test)]
mod tests {
    use super::*;

    fn sent() -> v1::Crossing {
        v1::Crossing {
            name: "crossings/desk-to-stage".into(),
            source_clock: "clocks/desk".into(),
            sink_clock: "clocks/stage".into(),
            max_l: 256,
            max_m: 512,
            ..Default::default()
        }
    }

    #[test]
    fn zero_means_the_documented_default() {
        let declared = declaration("crossing", Some(sent())).unwrap();
        assert_eq!(declared.headroom_samples, 1.0);
        assert_eq!(declared.lead_ns, 1_000_000_000);
        assert_eq!(declared.review_horizon_ns, 86_400_000_000_000);
        assert_eq!(
            (declared.least_hold_ns, declared.pitch_limit_ppm),
            (0, 20.0)
        );
        assert_eq!((declared.silent, &declared.backup), (false, &None));
        let shown = declaration_to_wire(&declared);
        assert_eq!(
            declaration("crossing", Some(shown.clone())).unwrap(),
            declared
        );
        assert_eq!(shown.realisation, v1::Realisation::Cadence as i32);
    }

    #[test]
    fn a_declaration_comes_back_as_it_was_sent() {
        for realisation in 1..=4 {
            let sent = v1::Crossing {
                realisation,
                ..spelt_out()
            };
            let declared = declaration("crossing", Some(sent.clone())).unwrap();
            assert_eq!(declaration_to_wire(&declared), sent);
        }
    }

    /// Every field that is declared, with a value of its own.
    fn spelt_out() -> v1::Crossing {
        v1::Crossing {
            display_name: "Desk to stage".into(),
            headroom_samples: 12.0,
            realisation: v1::Realisation::Lazy.into(),
            group: "tour".into(),
            lead_ns: 2_000_000,
            review_horizon_ns: 60_000_000_000,
            least_hold_ns: 5_000_000_000,
            pitch_limit_ppm: 3.5,
            silent: true,
            backup_clock: "clocks/spare".into(),
            ..sent()
        }
    }

    #[test]
    fn every_violation_is_named() {
        let wrong = v1::Crossing {
            name: "crossings/A".into(),
            sink_clock: String::new(),
            max_l: 0,
            max_m: 1 << 40,
            headroom_samples: f64::INFINITY,
            realisation: 9,
            group: "Two words".into(),
            lead_ns: -1,
            review_horizon_ns: 1,
            least_hold_ns: 3_600_000_000_001,
            pitch_limit_ppm: 0.05,
            backup_clock: "spare".into(),
            ..sent()
        };
        let Refused::Invalid(violations) = declaration("crossing", Some(wrong)).unwrap_err() else {
            panic!("a wrong field is a violation")
        };
        let fields: Vec<&str> = violations
            .iter()
            .map(|v| v.field.strip_prefix("crossing.").unwrap())
            .collect();
        assert_eq!(
            fields,
            [
                "name",
                "sink_clock",
                "max_l",
                "max_m",
                "headroom_samples",
                "realisation",
                "group",
                "lead_ns",
                "review_horizon_ns",
                "least_hold_ns",
                "pitch_limit_ppm",
                "backup_clock"
            ]
        );
    }

    #[test]
    fn each_field_of_the_mask_can_be_overlaid() {
        for field in FIELDS {
            let changed = overlay(v1::Crossing::default(), spelt_out(), &[field]);
            assert_ne!(changed, v1::Crossing::default(), "{field}");
        }
        let merged = overlay(
            sent(),
            v1::Crossing {
                max_l: 7,
                max_m: 7,
                ..sent()
            },
            &["max_l"],
        );
        assert_eq!((merged.max_l, merged.max_m), (7, 512));
    }
}
