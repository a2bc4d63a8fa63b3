//! Clocks and their estimates.

use prost::Message as _;
use ratewright_control::{ClockDeclaration, ClockEstimate};
use ratewright_proto::v1;
use ratewright_timing::{LatencyTail, Oscillator, State};

use super::{names, rate};
use crate::{
    board::ClockView,
    digest,
    refused::{Refused, Violation, Violations},
};

/// Fields of a clock that an update may change.
pub(crate) const FIELDS: [&str; 8] = [
    "display_name",
    "nominal_rate",
    "exact",
    "tolerance_ppm",
    "oscillator",
    "tail",
    "quantum_ns",
    "statistics",
];

const MAX_DISPLAY_NAME: usize = 128;

/// A declaration out of the field `field` of a request.
pub(crate) fn declaration(
    field: &str,
    sent: Option<v1::Clock>,
) -> Result<ClockDeclaration, Refused> {
    let Some(sent) = sent else {
        return Err(Violation::new(field, "absent", "a clock").into());
    };
    let at = |name: &str| format!("{field}.{name}");
    let mut violations = Violations::default();
    let id = violations.note(names::parse_clock(&at("name"), &sent.name));
    let display_name = violations.note(display_name(&at("display_name"), sent.display_name));
    let nominal_hz = violations.note(rate::rate(&at("nominal_rate"), sent.nominal_rate));
    let tolerance_ppm = violations.note(tolerance(&at("tolerance_ppm"), sent.tolerance_ppm));
    let oscillator = violations.note(oscillator(&at("oscillator"), sent.oscillator));
    let tail = violations.note(tail(&at("tail"), sent.tail));
    let quantum_ns = violations.note(quantum(&at("quantum_ns"), sent.quantum_ns));
    violations.into_result()?;
    let missing = "a field that is missing was noted as a violation";
    Ok(ClockDeclaration {
        display_name: display_name.expect(missing),
        exact: sent.exact,
        tolerance_ppm: tolerance_ppm.expect(missing),
        oscillator: oscillator.expect(missing),
        tail: tail.expect(missing),
        quantum_ns: quantum_ns.expect(missing),
        statistics: sent.statistics,
        ..ClockDeclaration::new(id.expect(missing), nominal_hz.expect(missing))
    })
}

/// The path of a field of the engine's declaration as the caller knows it.
pub(crate) fn path_of(field: &str) -> String {
    match field {
        "id" => "clock.name".into(),
        "nominal_hz" => "clock.nominal_rate".into(),
        other => format!("clock.{other}"),
    }
}

pub(crate) fn display_name(field: &str, sent: String) -> Result<String, Violation> {
    if sent.len() <= MAX_DISPLAY_NAME {
        Ok(sent)
    } else {
        Err(Violation::new(
            field,
            sent,
            format!("at most {MAX_DISPLAY_NAME} bytes"),
        ))
    }
}

fn tolerance(field: &str, sent: f64) -> Result<f64, Violation> {
    if (0.0..=10_000.0).contains(&sent) {
        Ok(sent)
    } else {
        Err(Violation::new(field, sent, "0 (not declared) to 10000 ppm"))
    }
}

fn oscillator(field: &str, sent: i32) -> Result<Option<Oscillator>, Violation> {
    match v1::Oscillator::try_from(sent) {
        Ok(v1::Oscillator::Unspecified) => Ok(None),
        Ok(v1::Oscillator::Crystal) => Ok(Some(Oscillator::Crystal)),
        Ok(v1::Oscillator::Compensated) => Ok(Some(Oscillator::Compensated)),
        Ok(v1::Oscillator::Oven) => Ok(Some(Oscillator::Oven)),
        Ok(v1::Oscillator::Atomic) => Ok(Some(Oscillator::Atomic)),
        Err(_) => {
            let accepted = "OSCILLATOR_CRYSTAL (1), OSCILLATOR_COMPENSATED (2), OSCILLATOR_OVEN (3), \
                            OSCILLATOR_ATOMIC (4), or 0 if it is not known";
            Err(Violation::new(field, sent, accepted))
        }
    }
}

fn oscillator_to_wire(oscillator: Option<Oscillator>) -> v1::Oscillator {
    match oscillator {
        None => v1::Oscillator::Unspecified,
        Some(Oscillator::Crystal) => v1::Oscillator::Crystal,
        Some(Oscillator::Compensated) => v1::Oscillator::Compensated,
        Some(Oscillator::Oven) => v1::Oscillator::Oven,
        Some(Oscillator::Atomic) => v1::Oscillator::Atomic,
    }
}

fn tail(field: &str, sent: i32) -> Result<Option<LatencyTail>, Violation> {
    match v1::LatencyTail::try_from(sent) {
        Ok(v1::LatencyTail::Unspecified) => Ok(None),
        Ok(v1::LatencyTail::ReferenceLate) => Ok(Some(LatencyTail::ReferenceLate)),
        Ok(v1::LatencyTail::CounterLate) => Ok(Some(LatencyTail::CounterLate)),
        Err(_) => {
            let accepted = "LATENCY_TAIL_REFERENCE_LATE (1), LATENCY_TAIL_COUNTER_LATE (2), or 0 if it is \
                            not known";
            Err(Violation::new(field, sent, accepted))
        }
    }
}

fn tail_to_wire(tail: Option<LatencyTail>) -> v1::LatencyTail {
    match tail {
        None => v1::LatencyTail::Unspecified,
        Some(LatencyTail::ReferenceLate) => v1::LatencyTail::ReferenceLate,
        Some(LatencyTail::CounterLate) => v1::LatencyTail::CounterLate,
    }
}

fn quantum(field: &str, sent: i64) -> Result<i64, Violation> {
    if (0..=1_000_000_000).contains(&sent) {
        Ok(sent)
    } else {
        let accepted = "0 (not known) to 10^9 ns (1 s)";
        Err(Violation::new(field, sent, accepted))
    }
}

/// The declaration alone, as it is stored.
pub(crate) fn declaration_to_wire(clock: &ClockDeclaration) -> v1::Clock {
    v1::Clock {
        name: names::clock(&clock.id),
        display_name: clock.display_name.clone(),
        nominal_rate: Some(rate::rate_to_wire(&clock.nominal_hz)),
        exact: clock.exact,
        tolerance_ppm: clock.tolerance_ppm,
        oscillator: oscillator_to_wire(clock.oscillator).into(),
        tail: tail_to_wire(clock.tail).into(),
        quantum_ns: clock.quantum_ns,
        statistics: clock.statistics,
        estimate: None,
        etag: String::new(),
        fault: String::new(),
    }
}

pub(crate) fn view_to_wire(view: &ClockView) -> v1::Clock {
    let estimate = Some(estimate_to_wire(&view.estimate));
    let fault = view.estimate.fault.as_ref();
    v1::Clock {
        estimate,
        fault: fault.map_or_else(String::new, ToString::to_string),
        etag: etag(&view.declaration),
        ..declaration_to_wire(&view.declaration)
    }
}

/// The etag of a declaration: the same for the same content.
pub(crate) fn etag(clock: &ClockDeclaration) -> String {
    format!(
        "{:016x}",
        digest::fnv1a(&declaration_to_wire(clock).encode_to_vec())
    )
}

fn estimate_to_wire(clock: &ClockEstimate) -> v1::Estimate {
    let estimate = &clock.estimate;
    v1::Estimate {
        state: state_to_wire(estimate.state).into(),
        drift: estimate.drift,
        deviation: estimate.deviation,
        drift_low: estimate.low,
        drift_high: estimate.high,
        phase_ns: estimate.phase_ns,
        as_of_ns: estimate.as_of_ns,
        last_reading_ns: estimate.last_reading_ns.unwrap_or(0),
        readings_used: estimate.rows_used,
        readings_set_aside: estimate.outliers,
        lock_expected_seconds: estimate.lock_expected_in_s,
        reference: clock
            .reference
            .as_ref()
            .map_or_else(String::new, names::reference),
    }
}

fn state_to_wire(state: State) -> v1::EstimateState {
    match state {
        State::FreeRunning => v1::EstimateState::FreeRunning,
        State::Acquiring => v1::EstimateState::Acquiring,
        State::Locked => v1::EstimateState::Locked,
        State::Holdover => v1::EstimateState::Holdover,
    }
}

/// `current` with the fields of `new` that `paths` name.
pub(crate) fn overlay(mut current: v1::Clock, new: v1::Clock, paths: &[&str]) -> v1::Clock {
    for path in paths {
        match *path {
            "display_name" => current.display_name = new.display_name.clone(),
            "nominal_rate" => current.nominal_rate = new.nominal_rate,
            "exact" => current.exact = new.exact,
            "tolerance_ppm" => current.tolerance_ppm = new.tolerance_ppm,
            "oscillator" => current.oscillator = new.oscillator,
            "tail" => current.tail = new.tail,
            "quantum_ns" => current.quantum_ns = new.quantum_ns,
            "statistics" => current.statistics = new.statistics,
            other => unreachable!("{other} is not among FIELDS"),
        }
    }
    current
}

#[cfg(test)]
mod tests {
    use super::*;

    fn sent() -> v1::Clock {
        v1::Clock {
            name: "clocks/desk".into(),
            display_name: "Desk".into(),
            nominal_rate: Some(v1::Rate {
                numerator: 48_000,
                denominator: 1,
            }),
            tolerance_ppm: 50.0,
            oscillator: v1::Oscillator::Oven.into(),
            tail: v1::LatencyTail::CounterLate.into(),
            quantum_ns: 20_833,
            ..Default::default()
        }
    }

    #[test]
    fn a_declaration_comes_back_as_it_was_sent() {
        let kinds = (0..=4).flat_map(|oscillator| (0..=2).map(move |tail| (oscillator, tail)));
        for (oscillator, tail) in kinds {
            let sent = v1::Clock {
                oscillator,
                tail,
                ..sent()
            };
            let declared = declaration("clock", Some(sent.clone())).unwrap();
            assert_eq!(declaration_to_wire(&declared), sent);
        }
    }

    #[test]
    fn every_violation_is_named() {
        let wrong = v1::Clock {
            name: "desk".into(),
            nominal_rate: Some(v1::Rate {
                numerator: 1,
                denominator: 0,
            }),
            tolerance_ppm: f64::NAN,
            oscillator: 5,
            tail: -1,
            quantum_ns: 1_000_000_001,
            ..sent()
        };
        let Refused::Invalid(violations) = declaration("clock", Some(wrong)).unwrap_err() else {
            panic!("a wrong field is a violation")
        };
        let fields: Vec<&str> = violations.iter().map(|v| v.field.as_str()).collect();
        assert_eq!(
            fields,
            [
                "clock.name",
                "clock.nominal_rate.denominator",
                "clock.tolerance_ppm",
                "clock.oscillator",
                "clock.tail",
                "clock.quantum_ns"
            ]
        );
        assert_eq!(violations[2].value, "NaN");
    }

    #[test]
    fn the_etag_tells_content_and_nothing_else() {
        let first = declaration("clock", Some(sent())).unwrap();
        let other = ClockDeclaration {
            tolerance_ppm: 20.0,
            ..first.clone()
        };
        assert_eq!(etag(&first), etag(&first.clone()));
        assert_ne!(etag(&first), etag(&other));
    }

    #[test]
    fn each_field_of_the_mask_is_overlaid() {
        for field in FIELDS {
            let changed = overlay(v1::Clock::default(), changed(), &[field]);
            assert_ne!(changed, v1::Clock::default(), "{field}");
        }
        let all = overlay(v1::Clock::default(), changed(), &FIELDS);
        assert_eq!(all, changed());
    }

    /// Every field that may be changed, with a value of its own.
    fn changed() -> v1::Clock {
        v1::Clock {
            name: String::new(),
            exact: true,
            statistics: true,
            ..sent()
        }
    }

    #[test]
    fn only_the_named_fields_are_overlaid() {
        let new = v1::Clock {
            display_name: "New".into(),
            exact: true,
            ..sent()
        };
        let merged = overlay(sent(), new, &["exact"]);
        assert_eq!((merged.display_name.as_str(), merged.exact), ("Desk", true));
    }
}
