//! From measurements to rows: checks, order, and exact unwrapping of counters.

use num_rational::Ratio;
use serde::{Deserialize, Serialize};

use crate::measurement::Measurement;
use crate::outcome::Refusal;

/// A fall of the sequence number by this much is a restart of the numbering.
const RESTART_FALL: u64 = 100_000;

/// One measurement in filter units: seconds since the first reading, µs and ppm.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) struct Row {
    /// Reference time since the first reading, s.
    pub(crate) t_s: f64,
    pub(crate) values: Values,
}

/// What a row says.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) enum Values {
    /// Clock minus reference, µs.
    OneWay(f64),
    /// Clock minus reference as seen going out and coming back, µs, both at the row's time.
    TwoWay([f64; 2]),
    /// Drift, ppm, and the variance of its reading, ppm².
    Drift(f64, f64),
}

/// What the first measurement fixed, and where unwrapping stands.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
enum Origin {
    Counter {
        bits: u32,
        reference_ns: i64,
        report: bool,
        anchor: Anchor,
        latest: Anchor,
    },
    Exchange {
        clock_ns: i128,
        reference_ns: i64,
    },
    Frequency {
        reference_ns: i64,
    },
}

/// A counter value with its unwrapped ticks since the first reading.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
struct Anchor {
    count: u64,
    ticks: i128,
    reference_ns: i64,
}

/// Checks measurements and turns them into rows.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) struct Intake {
    nominal_hz: Ratio<u64>,
    last: Option<Last>,
    origin: Option<Origin>,
}

#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
struct Last {
    sequence: u64,
    reference_ns: i64,
}

impl Intake {
    pub(crate) fn new(nominal_hz: Ratio<u64>) -> Self {
        Intake {
            nominal_hz,
            last: None,
            origin: None,
        }
    }

    /// Reference time of the last measurement taken, ns.
    pub(crate) fn last_reference_ns(&self) -> Option<i64> {
        self.last.map(|last| last.reference_ns)
    }

    /// A reference time as seconds since the first reading.
    pub(crate) fn seconds(&self, at_reference_ns: i64) -> f64 {
        let origin_ns = match self.origin {
            None => return 0.0,
            Some(
                Origin::Counter { reference_ns, .. }
                | Origin::Exchange { reference_ns, .. }
                | Origin::Frequency { reference_ns },
            ) => reference_ns,
        };
        to_f64(at_reference_ns as i128 - origin_ns as i128) * 1e-9
    }

    /// Tick of the counter, or of the timestamps, µs.
    pub(crate) fn quantum_us(&self) -> f64 {
        match self.origin {
            Some(Origin::Counter { .. }) => {
                1e6 * *self.nominal_hz.denom() as f64 / *self.nominal_hz.numer() as f64
            }
            _ => 1e-3,
        }
    }

    /// Checks a measurement and makes a row of it, none when its number is stale.
    /// `drift_ppm` is the drift by which counters are unwrapped.
    pub(crate) fn admit(
        &mut self,
        sequence: u64,
        m: &Measurement,
        drift_ppm: f64,
    ) -> Result<Option<Row>, Refusal> {
        check_ranges(m)?;
        self.check_kind(m)?;
        let reference_ns = m.reference_ns();
        if let Some(last) = self.last {
            if sequence <= last.sequence && last.sequence - sequence < RESTART_FALL {
                return Ok(None);
            }
            if reference_ns <= last.reference_ns {
                let field = if matches!(m, Measurement::Exchange { .. }) {
                    "t3_ns"
                } else {
                    "reference_ns"
                };
                return Err(Refusal::TimeWentBack {
                    field,
                    value: reference_ns,
                    last: last.reference_ns,
                });
            }
        }
        self.last = Some(Last {
            sequence,
            reference_ns,
        });
        let values = match *m {
            Measurement::Counter {
                count,
                bits,
                reference_ns,
            } => Values::OneWay(self.counter(count, bits, reference_ns, false, drift_ppm)),
            Measurement::SenderReport {
                media_timestamp,
                bits,
                reference_ns,
            } => Values::OneWay(self.counter(media_timestamp, bits, reference_ns, true, drift_ppm)),
            Measurement::Exchange {
                t1_ns,
                t2_ns,
                t3_ns,
                t4_ns,
            } => Values::TwoWay(self.exchange([t1_ns, t2_ns, t3_ns, t4_ns], drift_ppm)),
            Measurement::Frequency {
                drift,
                deviation,
                reference_ns,
            } => {
                self.origin
                    .get_or_insert(Origin::Frequency { reference_ns });
                Values::Drift(drift * 1e6, deviation * deviation * 1e12)
            }
        };
        Ok(Some(Row {
            t_s: self.seconds(reference_ns),
            values,
        }))
    }

    /// The latest counter value was believed: unwrap from it.
    pub(crate) fn confirm(&mut self) {
        if let Some(Origin::Counter { anchor, latest, .. }) = &mut self.origin {
            *anchor = *latest;
        }
    }

    fn check_kind(&self, m: &Measurement) -> Result<(), Refusal> {
        let accepted = match self.origin {
            None => return Ok(()),
            Some(Origin::Counter { report: false, .. }) => "counter",
            Some(Origin::Counter { report: true, .. }) => "sender report",
            Some(Origin::Exchange { .. }) => "exchange",
            Some(Origin::Frequency { .. }) => "frequency",
        };
        if m.kind() != accepted {
            return Err(Refusal::KindChanged {
                value: m.kind(),
                accepted,
            });
        }
        if let (
            Some(Origin::Counter { bits: accepted, .. }),
            Measurement::Counter { bits: value, .. }
            | Measurement::SenderReport { bits: value, .. },
        ) = (self.origin, *m)
            && value != accepted
        {
            return Err(Refusal::WidthChanged { value, accepted });
        }
        Ok(())
    }

    /// Clock minus reference in µs, from a counter unwrapped to what the drift foretells.
    fn counter(
        &mut self,
        count: u64,
        bits: u32,
        reference_ns: i64,
        report: bool,
        drift: f64,
    ) -> f64 {
        let first = Anchor {
            count,
            ticks: 0,
            reference_ns,
        };
        let origin = self.origin.get_or_insert(Origin::Counter {
            bits,
            reference_ns,
            report,
            anchor: first,
            latest: first,
        });
        let Origin::Counter {
            anchor,
            latest,
            reference_ns: first_ns,
            ..
        } = origin
        else {
            return 0.0; // check_kind has refused every other kind
        };
        let (numer, denom) = (
            *self.nominal_hz.numer() as i128,
            *self.nominal_hz.denom() as i128,
        );
        let elapsed_ns = reference_ns as i128 - anchor.reference_ns as i128;
        let foretold =
            to_f64(elapsed_ns) * 1e-9 * (numer as f64 / denom as f64) * (1.0 + drift * 1e-6);
        let modulus = 1_i128 << bits;
        let gained = (count as i128 - anchor.count as i128) & (modulus - 1);
        let wraps = (foretold as i128 - gained + modulus / 2) >> bits;
        let ticks = anchor.ticks + gained + (wraps << bits);
        *latest = Anchor {
            count,
            ticks,
            reference_ns,
        };
        let (seconds, rest) = divided(ticks * denom, numer);
        let (picoseconds, _) = divided(rest * 1_000_000_000_000, numer);
        let clock_ps = seconds * 1_000_000_000_000 + picoseconds;
        let reference_ps = (reference_ns as i128 - *first_ns as i128) * 1000;
        to_f64(clock_ps - reference_ps) * 1e-6
    }

    /// Clock minus reference going out and coming back, µs, both referred to t3.
    fn exchange(&mut self, [t1, t2, t3, t4]: [i64; 4], drift: f64) -> [f64; 2] {
        // The middle of the first exchange is where the phase begins.
        let first_trip = (t4 as i128 - t1 as i128) - (t3 as i128 - t2 as i128);
        let origin = self.origin.get_or_insert(Origin::Exchange {
            clock_ns: t1 as i128 + first_trip / 2,
            reference_ns: t2,
        });
        let Origin::Exchange {
            clock_ns,
            reference_ns,
        } = *origin
        else {
            return [0.0; 2]; // check_kind has refused every other kind
        };
        let difference = |clock: i64, reference: i64| {
            let clock = clock as i128 - clock_ns;
            let reference = reference as i128 - reference_ns as i128;
            to_f64(clock - reference) * 1e-3
        };
        let held_s = to_f64(t3 as i128 - t2 as i128) * 1e-9;
        [difference(t1, t2) + drift * held_s, difference(t4, t3)]
    }
}

/// The same number, by the processor's own instruction where 64 bits are enough.
fn to_f64(value: i128) -> f64 {
    match i64::try_from(value) {
        Ok(small) => small as f64,
        Err(_) => value as f64,
    }
}

/// Euclidean quotient and rest, by the processor's own division where 64 bits are enough.
fn divided(value: i128, by: i128) -> (i128, i128) {
    match (i64::try_from(value), i64::try_from(by)) {
        (Ok(value), Ok(by)) => (value.div_euclid(by).into(), value.rem_euclid(by).into()),
        _ => (value.div_euclid(by), value.rem_euclid(by)),
    }
}

fn check_ranges(m: &Measurement) -> Result<(), Refusal> {
    let refuse = |field, value: String, accepted| {
        Err(Refusal::OutOfRange {
            field,
            value,
            accepted,
        })
    };
    match *m {
        Measurement::Counter {
            count: value, bits, ..
        }
        | Measurement::SenderReport {
            media_timestamp: value,
            bits,
            ..
        } => {
            if !(1..=64).contains(&bits) {
                return refuse("bits", bits.to_string(), "1 to 64");
            }
            if bits < 64 && value >> bits != 0 {
                let field = if m.kind() == "counter" {
                    "count"
                } else {
                    "media_timestamp"
                };
                return refuse(field, value.to_string(), "a value below 2^bits");
            }
        }
        Measurement::Exchange {
            t1_ns,
            t2_ns,
            t3_ns,
            t4_ns,
        } => {
            if t3_ns < t2_ns {
                return refuse("t3_ns", t3_ns.to_string(), "a time not before t2_ns");
            }
            if t4_ns < t1_ns {
                return refuse("t4_ns", t4_ns.to_string(), "a time not before t1_ns");
            }
        }
        Measurement::Frequency {
            drift, deviation, ..
        } => {
            if !(-0.5..=0.5).contains(&drift) {
                return refuse(
                    "drift",
                    drift.to_string(),
                    "a finite number from -0.5 to 0.5",
                );
            }
            if !((1e-15..=1.0).contains(&deviation)) {
                return refuse(
                    "deviation",
                    deviation.to_string(),
                    "a finite number from 1e-15 to 1",
                );
            }
        }
    }
    Ok(())
}

#[cfg(test)]
mod tests {
    use super::*;

    fn counter(count: u64, reference_ns: i64) -> Measurement {
        Measurement::Counter {
            count,
            bits: 16,
            reference_ns,
        }
    }

    #[test]
    fn counters_unwrap_across_many_turns() {
        let mut intake = Intake::new(Ratio::new(48_000, 1));
        intake.admit(0, &counter(65_000, 0), 0.0).unwrap();
        // 10 s later 480,000 ticks have passed: seven turns and 21,248 more.
        let count = (65_000 + 480_000) % 65_536;
        let row = intake
            .admit(1, &counter(count, 10_000_000_000), 0.0)
            .unwrap()
            .unwrap();
        assert_eq!(row.values, Values::OneWay(0.0));
    }

    #[test]
    fn fractions_of_a_tick_rate_are_exact() {
        let mut intake = Intake::new(Ratio::new(30_000, 1001));
        intake.admit(0, &counter(0, 0), 0.0).unwrap();
        let row = intake
            .admit(1, &counter(30_000, 1_001_000_000_000), 0.0)
            .unwrap()
            .unwrap();
        assert_eq!(row.values, Values::OneWay(0.0));
    }

    #[test]
    fn a_refused_row_changes_nothing() {
        let mut intake = Intake::new(Ratio::new(48_000, 1));
        intake.admit(7, &counter(0, 1_000_000_000), 0.0).unwrap();
        let before = intake.clone();
        let bad = [
            counter(70_000, 2_000_000_000),
            counter(1, 1_000_000_000),
            Measurement::Counter {
                count: 0,
                bits: 0,
                reference_ns: 2_000_000_000,
            },
            Measurement::Counter {
                count: 0,
                bits: 32,
                reference_ns: 2_000_000_000,
            },
            Measurement::Frequency {
                drift: 0.0,
                deviation: 1e-9,
                reference_ns: 2_000_000_000,
            },
            Measurement::Frequency {
                drift: f64::NAN,
                deviation: 1e-9,
                reference_ns: 3,
            },
            Measurement::Exchange {
                t1_ns: 5,
                t2_ns: 9,
                t3_ns: 8,
                t4_ns: 6,
            },
        ];
        for m in bad {
            let refusal = intake.admit(8, &m, 0.0).unwrap_err();
            assert!(refusal.to_string().contains("accepted is"), "{refusal}");
            assert_eq!(intake, before);
        }
        assert_eq!(
            intake.admit(7, &counter(9, 9), 0.0),
            Ok(None),
            "a duplicate is stale, not refused"
        );
        assert_eq!(intake, before);
    }

    /// Media-clock rates of pairs of reports, RFC 3550 section 6.4.1: nominal Hz, two
    /// timestamps, seconds between, ppm (exact fractions).
    #[test]
    fn pairs_of_sender_reports_give_the_rate_across_the_wrap() {
        for (hz, first, second, seconds, ppm) in [
            (48_000, 1000, 241_006, 5, 25.0),
            (48_000, 4_294_867_296, 379_981, 10, -39.583_333_333_333_336),
            (90_000, 4_294_900_000, 5_333_244, 60, 100.0),
            (44_100, 0, 44_100, 1, 0.0),
        ] {
            let mut intake = Intake::new(Ratio::from_integer(hz));
            let report = |media_timestamp, second: i64| Measurement::SenderReport {
                media_timestamp,
                bits: 32,
                reference_ns: second * 1_000_000_000,
            };
            intake.admit(0, &report(first, 0), 0.0).unwrap();
            let row = intake
                .admit(1, &report(second, seconds), 0.0)
                .unwrap()
                .unwrap();
            let Values::OneWay(gained_us) = row.values else {
                panic!("{row:?}")
            };
            assert!(
                (gained_us / seconds as f64 - ppm).abs() < 1e-6,
                "{gained_us} µs, {ppm} ppm"
            );
        }
    }
}
