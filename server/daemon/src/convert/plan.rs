//! A planning question and its answer.

mod answer;
mod limit;
#[cfg(test)]
mod tests;

use num_rational::Ratio;
use ratewright_proto::v1;
use ratewright_ratio::{
    Exact, FrameCadence, FrameOrder, Interval, allowed::Allowed, stages::FilterSpec,
    target_from_rates,
};

use super::{names, rate};
use crate::refused::{Refused, Violation, Violations};
pub(crate) use answer::answer;

/// A question that has been checked.
#[derive(Debug)]
pub(crate) struct Question {
    target: Exact,
    allowed: Allowed,
    headroom_samples: f64,
    /// The sink's rate, if it is known.
    sink_rate_hz: Option<Ratio<u64>>,
    /// Interval of the target, if the drifts have a width.
    interval: Option<Interval>,
    filter: Option<Filter>,
    /// Phases of a resampler that steps.
    phases: Option<u64>,
    /// Samples of the source and of the sink per video frame.
    frames: Option<(FrameCadence, FrameCadence)>,
}

impl Question {
    /// The source's rate, Hz, if the sink's is known: that over the target.
    fn source_rate_hz(&self) -> Option<f64> {
        let sink = self.sink_rate_hz?;
        let target = *self.target.numer() as f64 / *self.target.denom() as f64;
        Some(*sink.numer() as f64 / *sink.denom() as f64 / target)
    }
}

/// What the filter has to do.
#[derive(Debug)]
struct Filter {
    spec: FilterSpec,
    /// The transition, as a part of the band below half the smaller rate.
    relative_width: f64,
}

pub(crate) fn question(sent: v1::PlanRatioRequest) -> Result<Question, Refused> {
    let nominal = nominal(&sent)?;
    let mut violations = Violations::default();
    let allowed = violations.note(limit::allowed(&sent));
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
    let filter = violations.note(filter(&sent, &nominal));
    let frames = violations.note(frames(&sent, &nominal));
    violations.into_result()?;
    let [Some(source), Some(sink), Some(source_half), Some(sink_half)] = drifts else {
        unreachable!("a drift that is missing was noted as a violation")
    };
    let (Some(headroom_samples), Some(allowed)) = (headroom, allowed) else {
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
    Ok(Question {
        target,
        allowed,
        headroom_samples,
        sink_rate_hz: nominal.rates.map(|(_, sink)| sink),
        interval,
        filter: filter.flatten(),
        phases: (sent.phases != 0).then_some(sent.phases),
        frames: frames.flatten(),
    })
}

struct Nominal {
    target: Exact,
    /// Source and sink rate, if they were sent.
    rates: Option<(Ratio<u64>, Ratio<u64>)>,
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
            rates: None,
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
                rates: Some((source, sink)),
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
/// 10^-15, so that both share a denominator, which cancels, and decimals stay what they are.
fn drifted(nominal: Exact, source: f64, sink: f64) -> Result<Exact, Violation> {
    let units = |drift: f64| ((1.0 + drift) * 1e15).round() as u128;
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

fn filter(sent: &v1::PlanRatioRequest, nominal: &Nominal) -> Result<Option<Filter>, Violation> {
    let Some(wish) = &sent.filter else {
        return Ok(None);
    };
    let (source, sink) = nominal.rates.ok_or_else(|| needs_rates("filter"))?;
    let hertz = |rate: Ratio<u64>| *rate.numer() as f64 / *rate.denom() as f64;
    let spec = FilterSpec {
        source_rate_hz: hertz(source),
        passband_hz: wish.passband_hz,
        stopband_db: wish.attenuation_db,
    };
    Ok(Some(Filter {
        spec,
        relative_width: 1.0 - wish.passband_hz / (hertz(source.min(sink)) / 2.0),
    }))
}

fn frames(
    sent: &v1::PlanRatioRequest,
    nominal: &Nominal,
) -> Result<Option<(FrameCadence, FrameCadence)>, Violation> {
    if sent.frame_rate.is_none() {
        return Ok(None);
    }
    let frame_rate = rate::rate("frame_rate", sent.frame_rate)?;
    let (source, sink) = nominal.rates.ok_or_else(|| needs_rates("frame_rate"))?;
    let of = |audio| {
        FrameCadence::new(audio, frame_rate, FrameOrder::Smpte272m).map_err(|why| {
            let accepted = format!("a rate with shorter periods: {why}");
            Violation::new("frame_rate", frame_rate, accepted)
        })
    };
    Ok(Some((of(source)?, of(sink)?)))
}

fn needs_rates(field: &str) -> Violation {
    Violation::new(
        field,
        "sent beside target",
        "none beside target: send the two rates",
    )
}
