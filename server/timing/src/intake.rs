//! From measurements to rows: checks, order, and exact unwrapping of counters.

use num_rational::Ratio;
use serde::{Deserialize, Serialize};

use crate::measurement::Measurement;
use crate::outcome::Refusal;

/// A fall of the sequence number by this much is a restart of the numbering.
const RESTART_FALL: u64 = 100_000;

/// One measurement in filter units: seconds since the first reading, µs and ppm.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(crate) struct Row {
    /// Reference time since the first reading, s.
    pub(crate) t_s: f64,
    pub(crate) values: Values,
    /// Where counters are unwrapped from once the row is believed.
    anchor: Option<Anchor>,
}

/// What a row says.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(crate) enum Values {
    /// Clock minus reference, µs.
    OneWay(f64),
    /// Clock minus reference as seen going out and coming back, µs, both at the row's time.
    TwoWay([f64; 2]),
    /// Drift, ppm, and the variance of its reading, ppm².
    Drift(f64, f64),
}

/// An integer of 128 bits that is aligned as one of 64, to save room.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
struct Wide {
    high: i64,
    low: u64,
}

impl From<i128> for Wide {
    fn from(value: i128) -> Self {
        Wide {
            high: (value >> 64) as i64,
            low: value as u64,
        }
    }
}

impl Wide {
    fn get(self) -> i128 {
        (i128::from(self.high) << 64) | i128::from(self.low)
    }
}

/// What the first measurement fixed, and where unwrapping stands.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
enum Origin {
    Counter {
        bits: u8,
        report: bool,
        first_count: u64,
        anchor: Anchor,
    },
    Exchange {
        clock_ns: Wide,
    },
    Frequency,
}

/// A counter as it would stand had it never wrapped.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
struct Anchor {
    unwrapped: Wide,
    reference_ns: i64,
}

/// Checks measurements and turns them into rows.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub(crate) struct Intake {
    nominal_hz: Ratio<u64>,
    seen: Option<Seen>,
}

/// What is kept of the first measurement and of the last.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
struct Seen {
    last_sequence: u64,
    last_reference_ns: i64,
    first_reference_ns: i64,
    origin: Origin,
}

impl Intake {
    pub(crate) fn new(nominal_hz: Ratio<u64>) -> Self {
        Intake {
            nominal_hz,
            seen: None,
        }
    }

    /// Reference time of the last measurement taken, ns.
    pub(crate) fn last_reference_ns(&self) -> Option<i64> {
        self.seen.map(|seen| seen.last_reference_ns)
    }

    /// A reference time as seconds since the first reading.
    pub(crate) fn seconds(&self, at_reference_ns: i64) -> f64 {
        self.seen.map_or(0.0, |seen| seen.seconds(at_reference_ns))
    }

    /// Tick of the counter, or of the timestamps, µs.
    pub(crate) fn quantum_us(&self) -> f64 {
        match self.seen.map(|seen| seen.origin) {
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
        let reference_ns = m.reference_ns();
        if let Some(seen) = &self.seen {
            seen.check_kind(m)?;
            if sequence <= seen.last_sequence && seen.last_sequence - sequence < RESTART_FALL {
                return Ok(None);
            }
            seen.check_time(m)?;
        }
        let seen = self.seen.get_or_insert_with(|| Seen::first(m));
        (seen.last_sequence, seen.last_reference_ns) = (sequence, reference_ns);
        let (values, anchor) = match *m {
            Measurement::Counter { count, .. }
            | Measurement::SenderReport {
                media_timestamp: count,
                ..
            } => {
                let (z, anchor) = seen.counter(count, reference_ns, self.nominal_hz, drift_ppm);
                (Values::OneWay(z), anchor)
            }
            Measurement::Exchange {
                t1_ns,
                t2_ns,
                t3_ns,
                t4_ns,
            } => {
                let z = seen.exchange([t1_ns, t2_ns, t3_ns, t4_ns], drift_ppm);
                (Values::TwoWay(z), None)
            }
            Measurement::Frequency {
                drift, deviation, ..
            } => (
                Values::Drift(drift * 1e6, deviation * deviation * 1e12),
                None,
            ),
        };
        Ok(Some(Row {
            t_s: seen.seconds(reference_ns),
            values,
            anchor,
        }))
    }

    /// A row was believed: unwrap from it.
    pub(crate) fn confirm(&mut self, row: &Row) {
        if let Some(Seen {
            origin: Origin::Counter { anchor, .. },
            ..
        }) = &mut self.seen
            && let Some(believed) = row.anchor
        {
            *anchor = believed;
        }
    }
}

impl Seen {
    fn first(m: &Measurement) -> Seen {
        let reference_ns = m.reference_ns();
        let (origin, first_reference_ns) = match *m {
            Measurement::Counter { count, bits, .. }
            | Measurement::SenderReport {
                media_timestamp: count,
                bits,
                ..
            } => {
                let anchor = Anchor {
                    unwrapped: i128::from(count).into(),
                    reference_ns,
                };
                let origin = Origin::Counter {
                    bits: bits as u8, // 1 to 64: the ranges were checked
                    report: m.kind() == "sender report",
                    first_count: count,
                    anchor,
                };
                (origin, reference_ns)
            }
            Measurement::Exchange {
                t1_ns,
                t2_ns,
                t3_ns,
                t4_ns,
            } => {
                // The middle of the first exchange is where the phase begins.
                let trip = (t4_ns as i128 - t1_ns as i128) - (t3_ns as i128 - t2_ns as i128);
                let clock_ns = (t1_ns as i128 + trip / 2).into();
                (Origin::Exchange { clock_ns }, t2_ns)
            }
            Measurement::Frequency { .. } => (Origin::Frequency, reference_ns),
        };
        Seen {
            last_sequence: 0,
            last_reference_ns: reference_ns,
            first_reference_ns,
            origin,
        }
    }

    fn seconds(&self, at_reference_ns: i64) -> f64 {
        to_f64(at_reference_ns as i128 - self.first_reference_ns as i128) * 1e-9
    }

    fn check_kind(&self, m: &Measurement) -> Result<(), Refusal> {
        let accepted = match self.origin {
            Origin::Counter { report: false, .. } => "counter",
            Origin::Counter { report: true, .. } => "sender report",
            Origin::Exchange { .. } => "exchange",
            Origin::Frequency => "frequency",
        };
        if m.kind() != accepted {
            return Err(Refusal::KindChanged {
                value: m.kind(),
                accepted,
            });
        }
        if let (
            Origin::Counter { bits: accepted, .. },
            Measurement::Counter { bits: value, .. }
            | Measurement::SenderReport { bits: value, .. },
        ) = (self.origin, *m)
            && value != u32::from(accepted)
        {
            return Err(Refusal::WidthChanged {
                value,
                accepted: accepted.into(),
            });
        }
        Ok(())
    }

    fn check_time(&self, m: &Measurement) -> Result<(), Refusal> {
        let (value, last) = (m.reference_ns(), self.last_reference_ns);
        if value > last {
            return Ok(());
        }
        let field = if matches!(m, Measurement::Exchange { .. }) {
            "t3_ns"
        } else {
            "reference_ns"
        };
        Err(Refusal::TimeWentBack { field, value, last })
    }

    /// Clock minus reference in µs, from a counter unwrapped to what the drift foretells, and
    /// where to unwrap the next one from.
    fn counter(
        &self,
        count: u64,
        reference_ns: i64,
        nominal_hz: Ratio<u64>,
        drift: f64,
    ) -> (f64, Option<Anchor>) {
        let Origin::Counter {
            bits,
            first_count,
            anchor,
            ..
        } = self.origin
        else {
            return (0.0, None); // check_kind has refused every other kind
        };
        let (numer, denom) = (*nominal_hz.numer() as i128, *nominal_hz.denom() as i128);
        let elapsed_ns = reference_ns as i128 - anchor.reference_ns as i128;
        let foretold =
            to_f64(elapsed_ns) * 1e-9 * (numer as f64 / denom as f64) * (1.0 + drift * 1e-6);
        let modulus = 1_i128 << bits;
        let last = anchor.unwrapped.get();
        let gained = (count as i128 - last) & (modulus - 1);
        let wraps = (foretold as i128 - gained + modulus / 2) >> bits;
        let unwrapped = last + gained + (wraps << bits);
        let (seconds, rest) = divided((unwrapped - first_count as i128) * denom, numer);
        let (picoseconds, _) = divided(rest * 1_000_000_000_000, numer);
        let clock_ps = seconds * 1_000_000_000_000 + picoseconds;
        let reference_ps = (reference_ns as i128 - self.first_reference_ns as i128) * 1000;
        let anchor = Anchor {
            unwrapped: unwrapped.into(),
            reference_ns,
        };
        (to_f64(clock_ps - reference_ps) * 1e-6, Some(anchor))
    }

    /// Clock minus reference going out and coming back, µs, both referred to t3.
    fn exchange(&self, [t1, t2, t3, t4]: [i64; 4], drift: f64) -> [f64; 2] {
        let Origin::Exchange { clock_ns } = self.origin else {
            return [0.0; 2]; // check_kind has refused every other kind
        };
        let difference = |clock: i64, reference: i64| {
            let clock = clock as i128 - clock_ns.get();
            let reference = reference as i128 - self.first_reference_ns as i128;
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
