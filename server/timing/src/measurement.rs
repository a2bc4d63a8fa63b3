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
}
