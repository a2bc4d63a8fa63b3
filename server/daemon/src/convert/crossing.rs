//! Crossings and their status.

use prost::Message as _;
use ratewright_control::{CrossingDeclaration, CrossingState, Realisation};
use ratewright_proto::v1;
use ratewright_ratio::Bounds;

use super::{clock::display_name, names, setting};
use crate::{
    board::CrossingView,
    digest,
    refused::{Refused, Violation, Violations},
};

/// Fields of a crossing that an update may change.
pub(crate) const FIELDS: [&str; 10] = [
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
        ..CrossingDeclaration::new(id.expect(missing), source, sink, bounds)
    })
}

/// The path of a field of the engine's declaration as the caller knows it.
pub(crate) fn path_of(field: &str) -> String {
    match field {
        "id" => "crossing.name".into(),
        "source" | "sink" => format!("crossing.{field}_clock"),
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
        Err(_) => {
            let accepted = "REALISATION_SINGLE (1), REALISATION_CADENCE (2), or 0 for the latter";
            Err(Violation::new(field, sent, accepted))
        }
    }
}

fn group(field: &str, sent: &str) -> Result<Option<ratewright_control::Id>, Violation> {
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

/// The declaration alone, as it is stored.
pub(crate) fn declaration_to_wire(crossing: &CrossingDeclaration) -> v1::Crossing {
    let realisation = match crossing.realisation {
        Realisation::Single => v1::Realisation::Single,
        Realisation::Cadence => v1::Realisation::Cadence,
        // Not in the contract yet, so that no crossing can be declared over it with these.
        Realisation::Stepping | Realisation::Lazy => v1::Realisation::Unspecified,
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
        let shown = declaration_to_wire(&declared);
        assert_eq!(
            declaration("crossing", Some(shown.clone())).unwrap(),
            declared
        );
        assert_eq!(shown.realisation, v1::Realisation::Cadence as i32);
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
                "review_horizon_ns"
            ]
        );
    }

    #[test]
    fn each_field_of_the_mask_can_be_overlaid() {
        for field in FIELDS {
            overlay(sent(), sent(), &[field]);
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
