//! What a probe reports of a simulated clock over simulated paths.

use num_rational::Ratio;

use super::clock::Clock;
use super::path::Path;
use super::random::Random;
use crate::measurement::Measurement;

fn ns(seconds: f64) -> i64 {
    libm::round(seconds * 1e9) as i64
}

/// A counter latched at a true time, its reference read late by the path's delay.
pub fn counter(
    clock: &mut Clock,
    path: &mut Path,
    nominal_hz: Ratio<u64>,
    bits: u32,
    at_ns: i64,
) -> Option<Measurement> {
    let count = clock.ticks(nominal_hz, bits, at_ns);
    let reference_ns = at_ns + ns(path.delay_s(at_ns)?);
    Some(Measurement::Counter {
        count,
        bits,
        reference_ns,
    })
}

/// A media timestamp sent at a true time, arrived late by the path's delay.
pub fn sender_report(
    clock: &mut Clock,
    path: &mut Path,
    nominal_hz: Ratio<u64>,
    bits: u32,
    at_ns: i64,
) -> Option<Measurement> {
    let media_timestamp = clock.ticks(nominal_hz, bits, at_ns);
    let reference_ns = at_ns + ns(path.delay_s(at_ns)?);
    Some(Measurement::SenderReport {
        media_timestamp,
        bits,
        reference_ns,
    })
}

/// A two-way exchange sent at a true time; the reference answers after 50 µs.
pub fn exchange(
    clock: &mut Clock,
    out: &mut Path,
    back: &mut Path,
    at_ns: i64,
) -> Option<Measurement> {
    let t1_ns = clock.reading_ns(at_ns);
    let t2_ns = at_ns + ns(out.delay_s(at_ns)?.max(0.0));
    let t3_ns = t2_ns + 50_000;
    let received_ns = t3_ns + ns(back.delay_s(t3_ns)?.max(0.0));
    let t4_ns = clock.reading_ns(received_ns);
    Some(Measurement::Exchange {
        t1_ns,
        t2_ns,
        t3_ns,
        t4_ns,
    })
}

/// The drift at a true time, read with a normal error.
pub fn frequency(
    clock: &mut Clock,
    random: &mut Random,
    deviation: f64,
    reference_ns: i64,
) -> Measurement {
    let drift = clock.drift(reference_ns) + deviation * random.normal();
    Measurement::Frequency {
        drift,
        deviation,
        reference_ns,
    }
}
