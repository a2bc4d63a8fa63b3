//! Readings out; nothing of them comes back.

use ratewright_proto::v1;

use super::name::{clock_name, reference_name};
use crate::{Exchange, Measurement, Reading};

impl From<&Reading> for v1::Reading {
    fn from(reading: &Reading) -> Self {
        Self {
            clock: clock_name(&reading.clock),
            reference: reference_name(&reading.reference),
            probe: reading
                .probe
                .as_ref()
                .map(ToString::to_string)
                .unwrap_or_default(),
            sequence: reading.sequence.unwrap_or_default(),
            measurement: Some(reading.measurement.into()),
        }
    }
}

impl From<Measurement> for v1::reading::Measurement {
    fn from(measurement: Measurement) -> Self {
        match measurement {
            Measurement::Counter {
                count,
                bits,
                reference_ns,
            } => Self::Counter(v1::CounterReading {
                count,
                bits,
                reference_ns,
            }),
            Measurement::Exchange(Exchange {
                t1_ns,
                t2_ns,
                t3_ns,
                t4_ns,
            }) => Self::Exchange(v1::TwoWayExchange {
                t1_ns,
                t2_ns,
                t3_ns,
                t4_ns,
            }),
            Measurement::SenderReport {
                media_timestamp,
                bits,
                reference_ns,
            } => Self::SenderReport(v1::SenderReport {
                media_timestamp,
                bits,
                reference_ns,
            }),
            Measurement::Frequency {
                drift,
                deviation,
                reference_ns,
            } => Self::Frequency(v1::FrequencyReading {
                drift,
                deviation,
                reference_ns,
            }),
        }
    }
}
