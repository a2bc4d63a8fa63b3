//! What a reporter sends.

use crate::Id;

/// One measurement of a clock against a reference.
///
/// Against [`Reference::House`] every time on the reference is **house time**: ns since 1970-01-01 on
/// a TAI-like scale, 37 s ahead of Unix time. [`Client::exchange_time`](crate::Client::exchange_time)
/// tells it; `examples/report.rs` shows how.
#[derive(Clone, Debug, PartialEq)]
pub struct Reading {
    /// The measured clock.
    pub clock: Id,
    /// What it was read against.
    pub reference: Reference,
    /// Which probe measured, for telling several probes of one clock apart.
    pub probe: Option<Id>,
    /// Numbering by the probe, per clock and reference, growing from 1 or more. `None` lets the
    /// [`Reporter`](crate::Reporter) number, so that a reading sent twice counts once.
    pub sequence: Option<u64>,
    /// What was measured.
    pub measurement: Measurement,
}

/// What a clock is read against.
#[derive(Clone, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub enum Reference {
    /// House time: ns since 1970-01-01, TAI-like; neither Unix time nor a time since the start of a
    /// machine.
    House,
    /// Another clock, usually the reporter's host.
    Clock(Id),
}

/// What was measured. Times are ns; see each field for whose.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Measurement {
    /// A counter of the clock's ticks. Latch the counter first, then read the reference at once.
    Counter {
        /// Ticks, less than 2^bits.
        count: u64,
        /// Width at which the counter wraps, 1 to 64.
        bits: u32,
        /// Time on the reference.
        reference_ns: i64,
    },
    /// A two-way exchange of timestamps.
    Exchange(Exchange),
    /// A media timestamp out of a sender report (RFC 3550) against its arrival.
    SenderReport {
        /// Timestamp in ticks of the nominal rate, less than 2^bits.
        media_timestamp: u64,
        /// Width at which the timestamp wraps, 1 to 64; 32 in RFC 3550.
        bits: u32,
        /// Arrival on the reference.
        reference_ns: i64,
    },
    /// A frequency measured by other means.
    Frequency {
        /// Drift against the reference, dimensionless, positive runs fast, within ±0.01.
        drift: f64,
        /// Its standard deviation, dimensionless, above 0.
        deviation: f64,
        /// Time on the reference.
        reference_ns: i64,
    },
}

/// The four timestamps of a message and its answer (RFC 5905, section 8), ns.
///
/// # Examples
/// Half the difference of the two one-way times is how far the measured clock is ahead:
/// ```
/// use ratewright_client::Exchange;
/// let exchange = Exchange { t1_ns: 1_000, t2_ns: 600, t3_ns: 700, t4_ns: 1_300 };
/// assert_eq!(exchange.ahead_ns(), 500);
/// assert_eq!(exchange.round_trip_ns(), 200);
/// ```
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Exchange {
    /// Message sent, on the measured clock.
    pub t1_ns: i64,
    /// Message received, on the reference.
    pub t2_ns: i64,
    /// Answer sent, on the reference.
    pub t3_ns: i64,
    /// Answer received, on the measured clock.
    pub t4_ns: i64,
}

impl Exchange {
    /// Measured clock minus reference, ns, if both ways took as long. (The offset of RFC 5905 has
    /// the opposite sign.)
    pub fn ahead_ns(&self) -> i64 {
        let (there, back) = (
            self.t1_ns.wrapping_sub(self.t2_ns),
            self.t4_ns.wrapping_sub(self.t3_ns),
        );
        ((i128::from(there) + i128::from(back)) / 2) as i64
    }

    /// Time spent on the way, ns.
    pub fn round_trip_ns(&self) -> i64 {
        self.t4_ns
            .wrapping_sub(self.t1_ns)
            .wrapping_sub(self.t3_ns.wrapping_sub(self.t2_ns))
    }
}
