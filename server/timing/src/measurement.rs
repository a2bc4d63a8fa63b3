//! What a probe reports: one measurement of a clock against its reference.

use serde::{Deserialize, Serialize};

/// One measurement of a clock against a reference, in nanoseconds of either.
///
/// A link takes one kind of measurement only; another kind is refused.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub enum Measurement {
    /// A tick counter latched first and the reference read right after, so that the error is
    /// mostly lateness of `reference_ns`.
    Counter {
        /// Counter value, below 2^`bits`; wraps to zero.
        count: u64,
        /// Width of the counter, 1..=64.
        bits: u32,
        /// Reference time read after the counter, ns.
        reference_ns: i64,
    },
    /// A two-way exchange: the clock sends at t1, the reference receives at t2 and answers at
    /// t3, the clock receives at t4.
    Exchange {
        /// Sent, on the clock, ns.
        t1_ns: i64,
        /// Received, on the reference, ns.
        t2_ns: i64,
        /// Answered, on the reference, ns; not before `t2_ns`.
        t3_ns: i64,
        /// Received back, on the clock, ns; not before `t1_ns`.
        t4_ns: i64,
    },
    /// A media timestamp out of a sender report against its arrival.
    SenderReport {
        /// Timestamp in ticks of the nominal rate, below 2^`bits`; wraps to zero.
        media_timestamp: u64,
        /// Width of the timestamp, 1..=64 (RFC 3550: 32).
        bits: u32,
        /// Arrival on the reference, ns.
        reference_ns: i64,
    },
    /// A drift that something else has measured.
    Frequency {
        /// Fractional frequency offset from nominal; positive runs fast. Dimensionless, within ±0.5.
        drift: f64,
        /// Standard deviation of `drift`, from 1e-15 to 1.
        deviation: f64,
        /// Reference time the reading speaks of, ns.
        reference_ns: i64,
    },
}

impl Measurement {
    /// Reference time of the measurement, ns: what must increase from one to the next.
    pub fn reference_ns(&self) -> i64 {
        match *self {
            Measurement::Counter { reference_ns, .. }
            | Measurement::SenderReport { reference_ns, .. }
            | Measurement::Frequency { reference_ns, .. } => reference_ns,
            Measurement::Exchange { t3_ns, .. } => t3_ns,
        }
    }

    /// Name of the kind, as messages show it.
    pub fn kind(&self) -> &'static str {
        match self {
            Measurement::Counter { .. } => "counter",
            Measurement::Exchange { .. } => "exchange",
            Measurement::SenderReport { .. } => "sender report",
            Measurement::Frequency { .. } => "frequency",
        }
    }

    /// Offset θ and round-trip delay δ of an exchange as RFC 5905 section 8 defines them, s.
    ///
    /// θ = ((t2 − t1) + (t3 − t4))/2 is reference minus clock, so a drift y makes θ fall:
    /// dθ/dt = −y, the opposite of this crate's sign.
    ///
    /// ```
    /// use ratewright_timing::Measurement;
    /// // A clock 1 ms ahead of its reference, 2 ms each way.
    /// let m = Measurement::Exchange { t1_ns: 1_000_000, t2_ns: 2_000_000, t3_ns: 2_000_000, t4_ns: 5_000_000 };
    /// assert_eq!(m.offset_and_delay_s(), Some((-0.001, 0.004)));
    /// ```
    pub fn offset_and_delay_s(&self) -> Option<(f64, f64)> {
        let Measurement::Exchange {
            t1_ns,
            t2_ns,
            t3_ns,
            t4_ns,
        } = *self
        else {
            return None;
        };
        let [t1, t2, t3, t4] = [t1_ns, t2_ns, t3_ns, t4_ns].map(i128::from);
        let twice_offset = (t2 - t1) + (t3 - t4);
        let delay = (t4 - t1) - (t3 - t2);
        Some((twice_offset as f64 / 2e9, delay as f64 / 1e9))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Timestamps of RFC 5905 as ns after the first: differences modulo 2^64 are signed, which
    /// is what carries them over an era. Expected values by exact fractions of 2^-32 s.
    #[test]
    fn offset_and_delay_are_those_of_rfc_5905() {
        let ns = |from: u64, to: u64| {
            let ticks = to.wrapping_sub(from) as i64 as i128;
            ((ticks * 1_000_000_000 + (1 << 31)) >> 32) as i64
        };
        let cases: [([u64; 4], f64, f64); 9] = [
            // symmetric path, server 0.5 s ahead, 20 ms each way, 5 ms server hold
            (
                [
                    0xe875470000000000,
                    0xe8754700851eb852,
                    0xe875470086666666,
                    0xe87547000b851eb8,
                ],
                0.5,
                0.0400000000372529,
            ),
            // asymmetric path 30/10 ms: offset error is half the asymmetry
            (
                [
                    0xe875470000000000,
                    0xe875470087ae147b,
                    0xe875470088f5c28f,
                    0xe87547000b851eb8,
                ],
                0.5100000000093132,
                0.0400000000372529,
            ),
            // server behind by 2 s
            (
                [
                    0xe875470000000000,
                    0xe87546fe028f5c29,
                    0xe87546fe02d0e560,
                    0xe875470005604189,
                ],
                -2.0,
                0.02000000001862645,
            ),
            // era rollover: client just before 2036-02-07T06:28:16Z, server just after
            (
                [
                    0xffffffff80000000,
                    0x0000000040000000,
                    0x0000000040418937,
                    0xffffffff99db22d1,
                ],
                0.6999999999534339,
                0.10000000009313226,
            ),
            // era rollover between T1 and T4
            (
                [
                    0xfffffffff0000000,
                    0xfffffffff8000000,
                    0xfffffffff8000001,
                    0x0000000000000000,
                ],
                1.1641532182693481e-10,
                0.062499999767169356,
            ),
            // apparent negative delay: 100 ppm fast client... T4-T1 reads 64 s, T3-T2 reads 64
            (
                [
                    0xe875470000000000,
                    0xe875470000000000,
                    0xe875474001a36e2f,
                    0xe875474000000000,
                ],
                0.0032000000355765224,
                -0.006400000071153045,
            ),
            // zero everything
            (
                [
                    0xe875470000000000,
                    0xe875470000000000,
                    0xe875470000000000,
                    0xe875470000000000,
                ],
                0.0,
                0.0,
            ),
            // 68-year edge: server 2^31-1 s ahead
            (
                [
                    0xe875470000000000,
                    0x687546ff00000000,
                    0x687546ff00000000,
                    0xe875470000000000,
                ],
                2147483647.0,
                0.0,
            ),
            // one-tick resolution
            (
                [
                    0xe875470000000000,
                    0xe875470000000001,
                    0xe875470000000001,
                    0xe875470000000001,
                ],
                1.1641532182693481e-10,
                2.3283064365386963e-10,
            ),
        ];
        for ([t1, t2, t3, t4], theta, delta) in cases {
            let m = Measurement::Exchange {
                t1_ns: 0,
                t2_ns: ns(t1, t2),
                t3_ns: ns(t1, t3),
                t4_ns: ns(t1, t4),
            };
            let (offset, delay) = m.offset_and_delay_s().unwrap();
            assert!((offset - theta).abs() <= 1.5e-9, "{offset} against {theta}");
            assert!((delay - delta).abs() <= 2.5e-9, "{delay} against {delta}");
        }
    }
}
