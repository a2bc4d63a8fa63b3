//! A planning question and its answer.

use num_rational::Ratio;
use ratewright_proto::v1;
use ratewright_ratio::{
    Bounds, Exact, Fraction, Interval,
    plan::{Candidate, Plan, Query, seconds_to_slip},
    simplest, target_from_rates,
};

use super::{names, rate, setting};
use crate::refused::{Refused, Violation, Violations};

/// A question that has been checked.
#[derive(Debug)]
pub(crate) struct Question {
    pub(crate) query: Query,
    /// Interval of the target, if the drifts have a width.
    pub(crate) interval: Option<Interval>,
}

pub(crate) fn question(sent: v1::PlanRatioRequest) -> Result<Question, Refused> {
    let nominal = nominal(&sent)?;
    let mut violations = Violations::default();
    let bounds = violations.note(bounds(&sent));
    let headroom = violations.note(headroom(sent.headroom_samples));
    let drifts = [
        violations.note(drift("source_drift", sent.source_drift)),
        violations.note(drift("sink_drift", sent.sink_drift)),
        violations.note(half_width(
            "source_drift_half_width",
            sent.source_drift_half_width,
        )),
        violations.note(half_width(
            "sink_drift_half_width",
            sent.sink_drift_half_width,
        )),
    ];
    violations.into_result()?;
    let [Some(source), Some(sink), Some(source_half), Some(sink_half)] = drifts else {
        unreachable!("a drift that is missing was noted as a violation")
    };
    let (Some(bounds), Some(headroom_samples)) = (bounds, headroom) else {
        unreachable!("a field that is missing was noted as a violation")
    };
    let target = drifted(nominal.target, source, sink)?;
    let interval = if source_half == 0.0 && sink_half == 0.0 {
        None
    } else {
        let low = drifted(nominal.target, source + source_half, sink - sink_half)?;
        let high = drifted(nominal.target, source - source_half, sink + sink_half)?;
        Some(
            Interval::closed(low, high).expect("a wider source and a slower sink lower the target"),
        )
    };
    let sink_rate_hz = nominal.sink_rate_hz;
    let query = Query {
        target,
        bounds,
        headroom_samples,
        sink_rate_hz,
        filter: None,
    };
    Ok(Question { query, interval })
}

struct Nominal {
    target: Exact,
    sink_rate_hz: Option<Ratio<u64>>,
}

fn nominal(sent: &v1::PlanRatioRequest) -> Result<Nominal, Refused> {
    let rates_sent = sent.source_rate.is_some() || sent.sink_rate.is_some();
    match &sent.target {
        Some(_) if rates_sent => {
            let accepted = "either target, or source_rate and sink_rate";
            Err(Violation::new("target", "both were sent", accepted).into())
        }
        Some(target) => Ok(Nominal {
            target: fraction("target", target)?,
            sink_rate_hz: None,
        }),
        None => {
            let mut violations = Violations::default();
            let source = violations.note(rate::rate("source_rate", sent.source_rate));
            let sink = violations.note(rate::rate("sink_rate", sent.sink_rate));
            violations.into_result()?;
            let (Some(source), Some(sink)) = (source, sink) else {
                unreachable!("a rate that is missing was noted as a violation")
            };
            let target = target_from_rates(source, sink).expect("a checked rate is not 0 Hz");
            Ok(Nominal {
                target,
                sink_rate_hz: Some(sink),
            })
        }
    }
}

fn fraction(field: &str, sent: &v1::Fraction) -> Result<Exact, Violation> {
    let part = |name: &str, digits: &str| match digits.parse::<u128>() {
        Ok(value) if value > 0 => Ok(value),
        _ => {
            let accepted = "decimal digits of a number from 1 to 2^128 - 1";
            Err(Violation::new(
                format!("{field}.{name}"),
                names::quoted(digits),
                accepted,
            ))
        }
    };
    Ok(Exact::new(
        part("numerator", &sent.numerator)?,
        part("denominator", &sent.denominator)?,
    ))
}

/// `nominal · (1 + sink) / (1 + source)`, exact but for the drifts, which are taken in units of
/// 2^-50 so that both share a denominator, which cancels.
fn drifted(nominal: Exact, source: f64, sink: f64) -> Result<Exact, Violation> {
    let units = |drift: f64| ((1.0 + drift) * (1_u64 << 50) as f64).round() as u128;
    if source == 0.0 && sink == 0.0 {
        return Ok(nominal);
    }
    let by = Exact::new(units(sink), units(source));
    // Cancelled crosswise first: what is left is in lowest terms and as small as it can be.
    let left = Exact::new(*nominal.numer(), *by.denom());
    let right = Exact::new(*by.numer(), *nominal.denom());
    let numerator = left.numer().checked_mul(*right.numer());
    let denominator = left.denom().checked_mul(*right.denom());
    match (numerator, denominator) {
        (Some(numerator), Some(denominator)) => Ok(Exact::new_raw(numerator, denominator)),
        _ => {
            let accepted =
                "parts below 2^77 where a drift is given, so that the product fits 128 bits";
            Err(Violation::new("target", nominal, accepted))
        }
    }
}

fn bounds(sent: &v1::PlanRatioRequest) -> Result<Bounds, Violation> {
    let bound = |field: &str, value: u64| match value {
        0 => Ok(1024),
        1..=0x8000_0000 => Ok(value),
        _ => Err(Violation::new(
            field,
            value,
            "1 to 2147483648, or 0 for 1024",
        )),
    };
    let (max_l, max_m) = (bound("max_l", sent.max_l)?, bound("max_m", sent.max_m)?);
    let bounds = Bounds::new(max_l, max_m).expect("2^31 is within what the ratio crate takes");
    if sent.largest_prime == 0 {
        return Ok(bounds);
    }
    bounds
        .with_largest_prime(sent.largest_prime)
        .map_err(|why| Violation::new("largest_prime", sent.largest_prime, why.to_string()))
}

fn headroom(sent: f64) -> Result<f64, Violation> {
    match sent {
        0.0 => Ok(1.0),
        sent if sent > 0.0 && sent <= 1e9 => Ok(sent),
        _ => Err(Violation::new(
            "headroom_samples",
            sent,
            "above 0 to 10^9 sink samples, or 0 for 1",
        )),
    }
}

fn drift(field: &str, sent: f64) -> Result<f64, Violation> {
    if sent.abs() <= 0.01 {
        Ok(sent)
    } else {
        Err(Violation::new(field, sent, "-0.01 to 0.01, dimensionless"))
    }
}

fn half_width(field: &str, sent: f64) -> Result<f64, Violation> {
    if (0.0..=0.01).contains(&sent) {
        Ok(sent)
    } else {
        Err(Violation::new(field, sent, "0 to 0.01, dimensionless"))
    }
}

pub(crate) fn plan_to_wire(question: &Question, plan: &Plan) -> v1::PlanRatioResponse {
    let simplest = question.interval.as_ref().and_then(simplest);
    v1::PlanRatioResponse {
        target: Some(rate::fraction_to_wire(&plan.target)),
        best: Some(candidate_to_wire(&plan.best)),
        ladder: ladder_to_wire(&question.query, plan),
        cadence: plan.cadence.as_ref().map(setting::cadence_to_wire),
        simplest: simplest.map(|simplest| rate::fraction_to_wire(&simplest.fraction)),
    }
}

fn candidate_to_wire(candidate: &Candidate) -> v1::Candidate {
    // The nearest ratio is proved by a bracket, never by an interval.
    let interval = (&candidate.ratio, &candidate.ratio);
    v1::Candidate {
        certificate: Some(setting::certificate_to_wire(
            &candidate.certificate,
            interval,
        )),
        ..rung_to_wire(
            &candidate.ratio,
            candidate.residual,
            candidate.seconds_to_slip,
        )
    }
}

/// The first and the last ratio of each rung: a rung may hold thousands.
fn ladder_to_wire(query: &Query, plan: &Plan) -> Vec<v1::Candidate> {
    let shown = |ratio: Fraction, residual: f64| {
        let slip = seconds_to_slip(residual, query.headroom_samples, query.sink_rate_hz);
        rung_to_wire(&ratio, residual, slip)
    };
    let mut ladder = Vec::new();
    for rung in &plan.ladder {
        ladder.push(shown(rung.first, rung.first_residual));
        if rung.count > 1 {
            ladder.push(shown(rung.last(), rung.last_residual));
        }
    }
    ladder
}

fn rung_to_wire(ratio: &Fraction, residual: f64, seconds_to_slip: Option<f64>) -> v1::Candidate {
    v1::Candidate {
        ratio: Some(rate::ratio_to_wire(ratio)),
        exact: residual == 0.0,
        residual_ppb: residual * 1e9,
        seconds_to_slip,
        certificate: None,
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn hertz(numerator: u64) -> Option<v1::Rate> {
        Some(v1::Rate {
            numerator,
            denominator: 1,
        })
    }

    fn request() -> v1::PlanRatioRequest {
        v1::PlanRatioRequest {
            source_rate: hertz(44_100),
            sink_rate: hertz(48_000),
            ..Default::default()
        }
    }

    #[test]
    fn nominal_rates_give_the_exact_target() {
        let question = question(request()).unwrap();
        assert_eq!(question.query.target, Exact::new(160, 147));
        let answer = plan_to_wire(&question, &ratewright_ratio::plan::plan(&question.query));
        let best = answer.best.unwrap();
        assert_eq!(best.ratio, Some(v1::Ratio { l: 160, m: 147 }));
        assert!(best.exact && best.seconds_to_slip.is_none());
    }

    #[test]
    fn a_fast_sink_raises_the_target() {
        let sent = v1::PlanRatioRequest {
            sink_drift: 1e-5,
            sink_drift_half_width: 1e-7,
            ..request()
        };
        let question = question(sent).unwrap();
        let target = question.query.target;
        let relative = *target.numer() as f64 / *target.denom() as f64 / (160.0 / 147.0) - 1.0;
        assert!((relative - 1e-5).abs() < 1e-15, "{relative}");
        let interval = question.interval.unwrap();
        assert!(interval.lo() < &target && &target < interval.hi());
    }

    #[test]
    fn the_longest_rates_still_fit() {
        let sent = v1::PlanRatioRequest {
            source_rate: Some(v1::Rate {
                numerator: 999_999_999_989,
                denominator: 999_999_937,
            }),
            sink_rate: Some(v1::Rate {
                numerator: 999_999_999_961,
                denominator: 999_999_929,
            }),
            source_drift: 1.234_567e-5,
            sink_drift: -7.654_321e-6,
            ..Default::default()
        };
        assert!(question(sent).is_ok());
    }

    #[test]
    fn faults_are_named() {
        let both = v1::PlanRatioRequest {
            target: Some(v1::Fraction::default()),
            ..request()
        };
        let zero = v1::PlanRatioRequest {
            target: Some(v1::Fraction {
                numerator: "1".into(),
                denominator: "0".into(),
            }),
            ..Default::default()
        };
        let wild = v1::PlanRatioRequest {
            max_l: 1 << 40,
            sink_drift: f64::NAN,
            ..request()
        };
        for (sent, fields) in [
            (both, vec!["target"]),
            (zero, vec!["target.denominator"]),
            (wild, vec!["max_l", "sink_drift"]),
            (
                v1::PlanRatioRequest::default(),
                vec!["source_rate", "sink_rate"],
            ),
        ] {
            let Refused::Invalid(violations) = question(sent).unwrap_err() else {
                panic!("a wrong field is a violation")
            };
            assert_eq!(
                violations
                    .iter()
                    .map(|v| v.field.as_str())
                    .collect::<Vec<_>>(),
                fields
            );
        }
    }
}
