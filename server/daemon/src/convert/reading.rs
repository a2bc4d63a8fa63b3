//! Readings in, receipts out.

use ratewright_control::{Event, Id, Reading, Reference, Refusal};
use ratewright_proto::v1::{self, reading::Measurement as Sent};
use ratewright_timing::Measurement;

use super::{engine, names};
use crate::refused::Violation;

/// Readings a batch may hold.
pub(crate) const MAX_BATCH: usize = 4096;

/// How the engine knows a probe that gave no name.
const UNNAMED_PROBE: &str = "unnamed";

/// What of a batch can be given to the engine, and what was refused before.
#[derive(Debug, Default)]
pub(crate) struct Batch {
    /// Readings.
    pub(crate) events: Vec<Event>,
    /// Of each of them its place in the batch.
    pub(crate) places: Vec<Place>,
    /// Refused ones.
    pub(crate) refusals: Vec<v1::Refusal>,
}

/// Where a reading was in its batch, and the name of its measurement in the contract.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) struct Place {
    pub(crate) index: usize,
    pub(crate) kind: &'static str,
}

/// What the readings of a batch name over and over, so that it is looked at once.
#[derive(Debug, Default)]
struct Names {
    clock: Last<Id>,
    reference: Last<Reference>,
    probe: Last<String>,
}

/// The last text, and what it means.
#[derive(Debug)]
struct Last<T>(Option<(String, T)>);

impl<T> Default for Last<T> {
    fn default() -> Self {
        Self(None)
    }
}

impl<T: Clone> Last<T> {
    fn parse(
        &mut self,
        sent: String,
        parse: impl FnOnce(&str) -> Result<T, Violation>,
    ) -> Result<T, Violation> {
        if let Some((text, parsed)) = &self.0
            && *text == sent
        {
            return Ok(parsed.clone());
        }
        let parsed = parse(&sent)?;
        self.0 = Some((sent, parsed.clone()));
        Ok(parsed)
    }
}

/// Takes a batch apart. One that is empty or too long is refused whole.
pub(crate) fn batch(sent: Vec<v1::Reading>) -> Batch {
    if sent.is_empty() || sent.len() > MAX_BATCH {
        let accepted = format!("1 to {MAX_BATCH} readings");
        let whole = refusal_of_all(Violation::new("readings", sent.len(), accepted));
        return Batch {
            refusals: vec![whole],
            ..Batch::default()
        };
    }
    let mut batch = Batch {
        events: Vec::with_capacity(sent.len()),
        places: Vec::with_capacity(sent.len()),
        refusals: Vec::new(),
    };
    let mut names = Names::default();
    for (index, sent) in sent.into_iter().enumerate() {
        match reading(sent, &mut names) {
            Ok(reading) => {
                let kind = kind(&reading.measurement);
                batch.places.push(Place { index, kind });
                batch.events.push(Event::Reading(reading));
            }
            Err(violation) => {
                batch
                    .refusals
                    .push(refusal(index as i32, violation.below(&at(index))));
            }
        }
    }
    batch
}

/// What the engine refused of a reading, as the reporter knows its fields.
pub(crate) fn refusal_by_engine(Place { index, kind }: Place, refused: Refusal) -> v1::Refusal {
    let violation = engine::violation(refused, |field| match field.strip_prefix("measurement.") {
        Some("kind") => "measurement".into(),
        Some(inner) => format!("{kind}.{inner}"),
        None => field.into(),
    });
    refusal(index as i32, violation.below(&at(index)))
}

/// A refusal of a whole batch.
pub(crate) fn refusal_of_all(violation: Violation) -> v1::Refusal {
    refusal(-1, violation)
}

fn refusal(
    index: i32,
    Violation {
        field,
        value,
        accepted,
    }: Violation,
) -> v1::Refusal {
    v1::Refusal {
        index,
        field,
        value,
        accepted,
    }
}

fn at(index: usize) -> String {
    format!("readings[{index}]")
}

/// Name of a measurement's field in the contract.
fn kind(measurement: &Measurement) -> &'static str {
    match measurement {
        Measurement::Counter { .. } => "counter",
        Measurement::SenderReport { .. } => "sender_report",
        Measurement::Exchange { .. } => "exchange",
        Measurement::Frequency { .. } => "frequency",
    }
}

fn reading(sent: v1::Reading, known: &mut Names) -> Result<Reading, Violation> {
    let clock = known
        .clock
        .parse(sent.clock, |sent| names::parse_clock("clock", sent))?;
    let reference = known.reference.parse(sent.reference, |sent| {
        names::parse_reference("reference", sent)
    })?;
    let probe = known.probe.parse(sent.probe, |sent| match sent {
        "" => Ok(UNNAMED_PROBE.to_owned()),
        named => Ok(names::parse_id("probe", named)?.to_string()),
    })?;
    let measurement = match sent.measurement {
        Some(Sent::Counter(counter)) => self::counter(counter)?,
        Some(Sent::Exchange(exchange)) => self::exchange(exchange)?,
        Some(Sent::Frequency(frequency)) => self::frequency(frequency)?,
        Some(Sent::SenderReport(report)) => sender_report(report)?,
        None => {
            let accepted = "counter, exchange, frequency or sender_report";
            return Err(Violation::new("measurement", "absent", accepted));
        }
    };
    Ok(Reading {
        clock,
        reference,
        probe,
        sequence: sent.sequence,
        measurement,
    })
}

fn counter(sent: v1::CounterReading) -> Result<Measurement, Violation> {
    let bits = width("counter.bits", sent.bits, 64)?;
    fits("counter.count", sent.count, bits)?;
    let reference_ns = time("counter.reference_ns", sent.reference_ns)?;
    Ok(Measurement::Counter {
        count: sent.count,
        bits,
        reference_ns,
    })
}

fn sender_report(sent: v1::SenderReport) -> Result<Measurement, Violation> {
    let bits = width("sender_report.bits", sent.bits, 32)?;
    let media_timestamp = sent.media_timestamp;
    fits("sender_report.media_timestamp", media_timestamp, bits)?;
    let reference_ns = time("sender_report.reference_ns", sent.reference_ns)?;
    Ok(Measurement::SenderReport {
        media_timestamp,
        bits,
        reference_ns,
    })
}

/// The width of a counter; 0 stands for `usual`.
fn width(field: &str, sent: u32, usual: u32) -> Result<u32, Violation> {
    match sent {
        0 => Ok(usual),
        1..=64 => Ok(sent),
        _ => Err(Violation::new(
            field,
            sent,
            format!("1 to 64, or 0 for {usual}"),
        )),
    }
}

fn fits(field: &str, sent: u64, bits: u32) -> Result<(), Violation> {
    if bits == 64 || sent >> bits == 0 {
        return Ok(());
    }
    let accepted = format!("less than 2^{bits}, the width that bits gives");
    Err(Violation::new(field, sent, accepted))
}

fn exchange(sent: v1::TwoWayExchange) -> Result<Measurement, Violation> {
    let v1::TwoWayExchange {
        t1_ns,
        t2_ns,
        t3_ns,
        t4_ns,
    } = sent;
    if t3_ns < t2_ns {
        let accepted = format!("at least exchange.t2_ns, {t2_ns}");
        return Err(Violation::new("exchange.t3_ns", t3_ns, accepted));
    }
    if t4_ns < t1_ns {
        let accepted = format!("at least exchange.t1_ns, {t1_ns}");
        return Err(Violation::new("exchange.t4_ns", t4_ns, accepted));
    }
    for (field, sent) in [
        ("t1_ns", t1_ns),
        ("t2_ns", t2_ns),
        ("t3_ns", t3_ns),
        ("t4_ns", t4_ns),
    ] {
        time(&format!("exchange.{field}"), sent)?;
    }
    Ok(Measurement::Exchange {
        t1_ns,
        t2_ns,
        t3_ns,
        t4_ns,
    })
}

fn frequency(sent: v1::FrequencyReading) -> Result<Measurement, Violation> {
    let v1::FrequencyReading {
        drift,
        deviation,
        reference_ns,
    } = sent;
    if !(-0.01..=0.01).contains(&drift) {
        return Err(Violation::new(
            "frequency.drift",
            drift,
            "-0.01 to 0.01, dimensionless",
        ));
    }
    if !(deviation > 0.0 && deviation <= 0.01) {
        let accepted = "above 0 to 0.01, dimensionless";
        return Err(Violation::new("frequency.deviation", deviation, accepted));
    }
    let reference_ns = time("frequency.reference_ns", reference_ns)?;
    Ok(Measurement::Frequency {
        drift,
        deviation,
        reference_ns,
    })
}

/// Times may count from any origin, but differences of two must fit 63 bits.
fn time(field: &str, sent: i64) -> Result<i64, Violation> {
    const LIMIT_NS: i64 = i64::MAX / 2;
    if (-LIMIT_NS..=LIMIT_NS).contains(&sent) {
        Ok(sent)
    } else {
        Err(Violation::new(
            field,
            sent,
            format!("-{LIMIT_NS} to {LIMIT_NS} ns"),
        ))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn sent(measurement: Sent) -> v1::Reading {
        v1::Reading {
            clock: "clocks/desk".into(),
            reference: "house".into(),
            measurement: Some(measurement),
            ..Default::default()
        }
    }

    fn drift(drift: f64) -> v1::Reading {
        sent(Sent::Frequency(v1::FrequencyReading {
            drift,
            deviation: 1e-8,
            reference_ns: 5,
        }))
    }

    #[test]
    fn one_bad_reading_leaves_the_others() {
        let batch = batch(vec![drift(1e-6), drift(f64::NAN), drift(2e-6)]);
        assert_eq!(batch.events.len(), 2);
        let kept: Vec<usize> = batch.places.iter().map(|place| place.index).collect();
        assert_eq!(kept, [0, 2]);
        assert_eq!(
            batch.refusals,
            [v1::Refusal {
                index: 1,
                field: "readings[1].frequency.drift".into(),
                value: "NaN".into(),
                accepted: "-0.01 to 0.01, dimensionless".into(),
            }]
        );
    }

    #[test]
    fn too_many_and_none_are_refused_whole() {
        for count in [0, MAX_BATCH + 1] {
            let batch = batch(vec![drift(0.0); count]);
            assert!(batch.events.is_empty());
            assert_eq!(batch.refusals.len(), 1);
            let refusal = &batch.refusals[0];
            assert_eq!((refusal.index, refusal.field.as_str()), (-1, "readings"));
            assert_eq!(refusal.value, count.to_string());
        }
        assert_eq!(batch(vec![drift(0.0); MAX_BATCH]).events.len(), MAX_BATCH);
    }

    #[test]
    fn names_that_change_within_a_batch_are_each_taken_as_sent() {
        let named = |clock: &str, reference: &str, probe: &str| v1::Reading {
            clock: clock.into(),
            reference: reference.into(),
            probe: probe.into(),
            ..drift(0.0)
        };
        let rows = [
            ("clocks/a", "house", "", "unnamed"),
            ("clocks/a", "clocks/b", "", "unnamed"),
            ("clocks/b", "house", "rack", "rack"),
            ("clocks/b", "house", "rack", "rack"),
            ("clocks/a", "house", "", "unnamed"),
        ];
        let sent = rows.map(|(clock, reference, probe, _)| named(clock, reference, probe));
        for (event, row) in batch(sent.to_vec()).events.iter().zip(rows) {
            let Event::Reading(reading) = event else {
                panic!("nothing else is made of a batch: {event:?}");
            };
            let clock = names::clock(&reading.clock);
            let reference = names::reference(&reading.reference);
            let (_, _, _, probe) = row;
            assert_eq!((clock.as_str(), reference.as_str()), (row.0, row.1));
            assert_eq!(reading.probe, probe);
        }
    }

    #[test]
    fn each_field_is_named_in_its_place() {
        let counter = |count, bits| {
            sent(Sent::Counter(v1::CounterReading {
                count,
                bits,
                reference_ns: 0,
            }))
        };
        let report = |media_timestamp, bits| {
            sent(Sent::SenderReport(v1::SenderReport {
                media_timestamp,
                bits,
                reference_ns: 0,
            }))
        };
        let exchange = |t1_ns, t2_ns, t3_ns, t4_ns| {
            sent(Sent::Exchange(v1::TwoWayExchange {
                t1_ns,
                t2_ns,
                t3_ns,
                t4_ns,
            }))
        };
        let cases = [
            (counter(0, 65), "counter.bits"),
            (counter(1 << 32, 32), "counter.count"),
            (report(0, 65), "sender_report.bits"),
            (report(1 << 32, 0), "sender_report.media_timestamp"),
            (exchange(0, 5, 4, 9), "exchange.t3_ns"),
            (exchange(10, 4, 5, 9), "exchange.t4_ns"),
            (exchange(i64::MIN, 4, 5, 9), "exchange.t1_ns"),
            (
                v1::Reading {
                    measurement: None,
                    ..counter(0, 0)
                },
                "measurement",
            ),
            (
                v1::Reading {
                    clock: "desk".into(),
                    ..counter(0, 0)
                },
                "clock",
            ),
            (
                v1::Reading {
                    reference: "mars".into(),
                    ..counter(0, 0)
                },
                "reference",
            ),
            (
                v1::Reading {
                    probe: "No".into(),
                    ..counter(0, 0)
                },
                "probe",
            ),
        ];
        for (reading, field) in cases {
            let refused = super::reading(reading, &mut Names::default()).unwrap_err();
            assert_eq!(refused.field, field);
        }
        let is_taken = |sent| reading(sent, &mut Names::default()).is_ok();
        assert!(is_taken(counter(u64::MAX, 0)));
        assert!(is_taken(report(u64::from(u32::MAX), 0)));
        assert!(is_taken(report(1 << 32, 33)));
    }
}
