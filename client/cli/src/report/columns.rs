//! Finding the columns of a record and reading its rows.

use csv::StringRecord;
use ratewright_client::{Exchange, Measurement};

use super::Arguments;
use crate::decimal::Decimal;

const SEQUENCE: &str = "sequence";
const EXCHANGE: [&str; 4] = ["t1_ns", "t2_ns", "t3_ns", "t4_ns"];
const FREQUENCY: [&str; 2] = ["drift_ppm", "deviation_ppm"];
const SENDER_REPORT: &str = "media_timestamp";
/// Width of a counter, and of the timestamps of RFC 3550.
const BITS: (u32, u32) = (64, 32);

/// Where the parts of a measurement are in a row.
#[derive(Clone, Debug)]
pub(super) struct Columns {
    header: Vec<String>,
    sequence: Option<usize>,
    kind: Kind,
}

#[derive(Clone, Copy, Debug)]
enum Kind {
    Counter {
        count: usize,
        bits: u32,
        reference: Time,
    },
    Exchange([usize; 4]),
    SenderReport {
        timestamp: usize,
        bits: u32,
        reference: Time,
    },
    Frequency {
        drift: usize,
        deviation: usize,
        reference: Time,
    },
}

/// A column of times and its unit, ns.
#[derive(Clone, Copy, Debug)]
struct Time {
    column: usize,
    unit_ns: i128,
}

impl Columns {
    /// Finds what the header promises.
    pub(super) fn find(header: &StringRecord, arguments: &Arguments) -> Result<Self, String> {
        let find = |name: &str| header.iter().position(|column| column == name);
        let all = |names: &[&str]| {
            names
                .iter()
                .map(|name| find(name))
                .collect::<Option<Vec<_>>>()
        };
        let time = find(&arguments.reference_column).map(|column| Time {
            column,
            unit_ns: arguments.reference_unit.ns(),
        });
        let counter = find(&arguments.count_column);
        let kind = match (all(&EXCHANGE), all(&FREQUENCY), counter, time) {
            (Some(columns), ..) => Kind::Exchange([columns[0], columns[1], columns[2], columns[3]]),
            (_, Some(columns), _, Some(reference)) => Kind::Frequency {
                drift: columns[0],
                deviation: columns[1],
                reference,
            },
            (_, _, Some(count), Some(reference)) => Kind::Counter {
                count,
                bits: arguments.bits.unwrap_or(BITS.0),
                reference,
            },
            (.., Some(reference)) if let Some(timestamp) = find(SENDER_REPORT) => {
                Kind::SenderReport {
                    timestamp,
                    bits: arguments.bits.unwrap_or(BITS.1),
                    reference,
                }
            }
            _ => return Err(no_kind(header, arguments)),
        };
        let header: Vec<String> = header.iter().map(str::to_owned).collect();
        Ok(Self {
            header,
            sequence: find(SEQUENCE),
            kind,
        })
    }

    /// The measurement of a row, with its sequence number if there is such a column.
    pub(super) fn read(&self, row: &StringRecord) -> Result<(Option<u64>, Measurement), String> {
        let sequence = self
            .sequence
            .map(|column| self.whole(row, column))
            .transpose()?;
        let measurement = match self.kind {
            Kind::Counter {
                count,
                bits,
                reference,
            } => Measurement::Counter {
                count: self.whole(row, count)?,
                bits,
                reference_ns: self.time(row, reference)?,
            },
            Kind::Exchange(columns) => {
                let [t1, t2, t3, t4] = columns.map(|column| Time { column, unit_ns: 1 });
                Measurement::Exchange(Exchange {
                    t1_ns: self.time(row, t1)?,
                    t2_ns: self.time(row, t2)?,
                    t3_ns: self.time(row, t3)?,
                    t4_ns: self.time(row, t4)?,
                })
            }
            Kind::SenderReport {
                timestamp,
                bits,
                reference,
            } => Measurement::SenderReport {
                media_timestamp: self.whole(row, timestamp)?,
                bits,
                reference_ns: self.time(row, reference)?,
            },
            Kind::Frequency {
                drift,
                deviation,
                reference,
            } => Measurement::Frequency {
                drift: self.number(row, drift)? * 1e-6,
                deviation: self.number(row, deviation)? * 1e-6,
                reference_ns: self.time(row, reference)?,
            },
        };
        Ok((sequence, measurement))
    }

    fn whole(&self, row: &StringRecord, column: usize) -> Result<u64, String> {
        let text = self.cell(row, column)?;
        text.parse()
            .map_err(|_| self.refusal(column, text, "whole numbers from 0, below 2^64"))
    }

    fn time(&self, row: &StringRecord, time: Time) -> Result<i64, String> {
        let text = self.cell(row, time.column)?;
        let ns = Decimal::parse(text).and_then(|time_in_unit| time_in_unit.scaled(time.unit_ns));
        ns.ok_or_else(|| self.refusal(time.column, text, "decimal numbers within 2^63 ns"))
    }

    fn number(&self, row: &StringRecord, column: usize) -> Result<f64, String> {
        let text = self.cell(row, column)?;
        let number = text.parse::<f64>().ok().filter(|number| number.is_finite());
        number.ok_or_else(|| self.refusal(column, text, "finite numbers"))
    }

    fn cell<'row>(&self, row: &'row StringRecord, column: usize) -> Result<&'row str, String> {
        row.get(column)
            .ok_or_else(|| format!("no {}: the row is too short", self.header[column]))
    }

    fn refusal(&self, column: usize, text: &str, accepted: &str) -> String {
        format!(
            "{} is {text:?}; accepted are {accepted}",
            self.header[column]
        )
    }
}

fn no_kind(header: &StringRecord, arguments: &Arguments) -> String {
    if header.is_empty() {
        return "there is no first line that names the columns".to_owned();
    }
    let found: Vec<&str> = header.iter().collect();
    let (count, reference) = (&arguments.count_column, &arguments.reference_column);
    format!(
        "the columns are {}; expected are {count},{reference} (a counter), {} (exchanges), \
         {SENDER_REPORT},{reference} (sender reports) or {},{reference} (frequencies). For a counter under other names type --count-column COLUMN \
         --reference-column COLUMN --reference-unit s",
        found.join(","),
        EXCHANGE.join(","),
        FREQUENCY.join(","),
    )
}
