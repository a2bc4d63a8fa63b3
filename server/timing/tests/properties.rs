//! What holds for any input: finite answers or refusals, saved state that goes on identically,
//! and answers that shift and scale with what is measured.

use num_rational::Ratio;
use proptest::prelude::*;
use ratewright_timing::sim::{Clock, ClockModel, Delay, Path, PathModel, probe};
use ratewright_timing::{Estimate, Link, LinkConfig, Measurement};

const NS: i64 = 1_000_000_000;

fn any_time() -> impl Strategy<Value = i64> {
    prop_oneof![
        4 => 0..1_000_000 * NS,
        1 => any::<i64>(),
        1 => Just(i64::MAX),
        1 => Just(i64::MIN),
    ]
}

fn any_measurement() -> impl Strategy<Value = Measurement> {
    let counter = (
        any::<u64>(),
        prop_oneof![Just(32_u32), Just(64), Just(16), any::<u32>()],
        any_time(),
    );
    prop_oneof![
        4 => counter.prop_map(|(count, bits, reference_ns)| {
            let count = if (1..64).contains(&bits) { count >> (64 - bits) } else { count };
            Measurement::Counter { count, bits, reference_ns }
        }),
        2 => [any_time(), any_time(), any_time(), any_time()].prop_map(|[t1_ns, t2_ns, t3_ns, t4_ns]| {
            Measurement::Exchange { t1_ns, t2_ns, t3_ns, t4_ns }
        }),
        2 => (any::<f64>(), any::<f64>(), any_time()).prop_map(|(drift, deviation, reference_ns)| {
            Measurement::Frequency { drift, deviation, reference_ns }
        }),
    ]
}

fn assert_finite(e: &Estimate) {
    for value in [
        e.drift,
        e.deviation,
        e.low,
        e.high,
        e.drift_rate_per_s,
        e.phase_ns,
        e.phase_deviation_ns,
    ] {
        assert!(value.is_finite(), "{e:?}");
    }
    assert!(
        e.low <= e.drift && e.drift <= e.high && e.deviation >= 0.0,
        "{e:?}"
    );
    assert!(e.phase_growth_deviation_s(3600.0).is_finite(), "{e:?}");
}

fn saved(link: &Link) -> Vec<u8> {
    postcard::to_stdvec(link).unwrap()
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 300, failure_persistence: None, ..ProptestConfig::default() })]

    #[test]
    fn any_sequence_leaves_a_finite_estimate_or_a_refusal(
        measurements in proptest::collection::vec(any_measurement(), 1..80),
        ask in any_time(),
    ) {
        let mut link = Link::new(LinkConfig::new(Ratio::new(30_000, 1001))).unwrap();
        for (i, m) in measurements.iter().enumerate() {
            let before = saved(&link);
            if link.observe(i as u64, m).is_err() {
                prop_assert_eq!(&saved(&link), &before, "a refusal changed the state");
            }
            assert_finite(&link.estimate(m.reference_ns()));
            assert_finite(&link.estimate(ask));
        }
    }

    #[test]
    fn wild_values_at_rising_times_stay_finite(
        kind in 0..3,
        rows in proptest::collection::vec((1..1_000 * NS, any::<u64>(), any::<i32>(), -20.0..0.0_f64), 20..150),
    ) {
        let mut link = Link::new(LinkConfig::new(Ratio::from_integer(48_000))).unwrap();
        let mut reference_ns = 0;
        for (i, &(stride, count, offset, exponent)) in rows.iter().enumerate() {
            reference_ns += stride;
            let m = match kind {
                0 => Measurement::Counter { count, bits: 64, reference_ns },
                1 => {
                    let t1_ns = offset as i64 * (count % 1_000_000_007) as i64;
                    Measurement::Exchange {
                        t1_ns,
                        t2_ns: reference_ns - stride / 2,
                        t3_ns: reference_ns,
                        t4_ns: t1_ns.saturating_add((count >> 3) as i64),
                    }
                }
                _ => Measurement::Frequency {
                    drift: offset as f64 / i32::MAX as f64 / 2.0,
                    deviation: 10f64.powf(exponent),
                    reference_ns,
                },
            };
            let _ = link.observe(i as u64, &m);
            assert_finite(&link.estimate(reference_ns));
            assert_finite(&link.estimate(reference_ns + 100_000 * NS));
        }
    }

    #[test]
    fn huge_strides_of_time_stay_finite(strides in proptest::collection::vec(1..i64::MAX / 64, 20..60)) {
        let mut link = Link::new(LinkConfig::new(Ratio::from_integer(48_000))).unwrap();
        let mut reference_ns = i64::MIN;
        for (i, stride) in strides.iter().enumerate() {
            reference_ns = reference_ns.saturating_add(*stride);
            let m = Measurement::Counter { count: i as u64, bits: 64, reference_ns };
            let _ = link.observe(i as u64, &m);
            assert_finite(&link.estimate(reference_ns));
        }
    }
}

/// Some hundred readings of a simulated clock.
fn readings(kind: &str, count: i64, seed: u64) -> Vec<Measurement> {
    let model = ClockModel {
        drift: -21e-6,
        ..ClockModel::crystal()
    };
    let mut clock = Clock::new(model, seed);
    let delay = Delay::Tailed {
        deviation_s: 10e-6,
        share: 0.2,
        tail_s: 80e-6,
        outliers: 0.01,
    };
    let mut out = Path::new(
        PathModel {
            least_s: 1e-3,
            ..PathModel::new(delay)
        },
        seed + 1,
    );
    let mut back = Path::new(
        PathModel {
            least_s: 1e-3,
            ..PathModel::new(delay)
        },
        seed + 2,
    );
    let hz = Ratio::from_integer(48_000);
    let mut random = ratewright_timing::sim::Random::new(seed);
    (1..=count)
        .filter_map(|i| match kind {
            "counter" => probe::counter(&mut clock, &mut out, hz, 32, i * NS),
            "report" => probe::sender_report(&mut clock, &mut out, hz, 32, i * NS),
            "exchange" => probe::exchange(&mut clock, &mut out, &mut back, i * NS),
            _ => Some(probe::frequency(&mut clock, &mut random, 1e-7, i * NS)),
        })
        .collect()
}

fn feed(link: &mut Link, readings: &[Measurement], from: u64) {
    for (i, m) in readings.iter().enumerate() {
        link.observe(from + i as u64, m).unwrap();
    }
}

#[test]
fn saved_at_any_point_it_goes_on_identically() {
    for kind in ["counter", "report", "exchange", "frequency"] {
        let readings = readings(kind, 400, 7);
        let mut whole = Link::new(LinkConfig::new(Ratio::from_integer(48_000))).unwrap();
        feed(&mut whole, &readings, 0);
        let expected = saved(&whole);
        for cut in [0, 1, 2, 15, 16, 17, 40, 63, 64, 65, 66, 200, 399] {
            let mut first = Link::new(LinkConfig::new(Ratio::from_integer(48_000))).unwrap();
            feed(&mut first, &readings[..cut], 0);
            let mut second: Link = postcard::from_bytes(&saved(&first)).unwrap();
            feed(&mut second, &readings[cut..], cut as u64);
            assert_eq!(saved(&second), expected, "{kind} cut at {cut}");
        }
    }
}

#[test]
fn json_keeps_the_state_too() {
    let mut link = Link::new(LinkConfig::new(Ratio::from_integer(48_000))).unwrap();
    feed(&mut link, &readings("exchange", 300, 3), 0);
    let text = serde_json::to_string(&link).expect("no infinities and no map keys in the state");
    let again: Link = serde_json::from_str(&text).unwrap();
    assert_eq!(
        again.estimate(301 * NS).rows_used,
        link.estimate(301 * NS).rows_used
    );
}

#[test]
fn shifting_the_reference_shifts_nothing_but_the_times() {
    let shift = 1_700_000_000 * NS + 123_456_789;
    for kind in ["counter", "report", "frequency"] {
        let plain = readings(kind, 300, 11);
        let shifted = plain.iter().map(|m| match *m {
            Measurement::Counter {
                count,
                bits,
                reference_ns,
            } => Measurement::Counter {
                count,
                bits,
                reference_ns: reference_ns + shift,
            },
            Measurement::SenderReport {
                media_timestamp,
                bits,
                reference_ns,
            } => Measurement::SenderReport {
                media_timestamp,
                bits,
                reference_ns: reference_ns + shift,
            },
            Measurement::Frequency {
                drift,
                deviation,
                reference_ns,
            } => Measurement::Frequency {
                drift,
                deviation,
                reference_ns: reference_ns + shift,
            },
            other => other,
        });
        let shifted: Vec<_> = shifted.collect();
        let mut links =
            [0, 1].map(|_| Link::new(LinkConfig::new(Ratio::from_integer(48_000))).unwrap());
        feed(&mut links[0], &plain, 0);
        feed(&mut links[1], &shifted, 0);
        let a = links[0].estimate(301 * NS);
        let mut b = links[1].estimate(301 * NS + shift);
        b.as_of_ns -= shift;
        b.last_reading_ns = b.last_reading_ns.map(|ns| ns - shift);
        assert_eq!(a, b, "{kind}");
    }
}

#[test]
fn a_counter_of_twice_the_rate_tells_the_same() {
    let plain = readings("counter", 300, 12);
    let doubled: Vec<_> = plain
        .iter()
        .map(|m| match *m {
            Measurement::Counter {
                count,
                reference_ns,
                ..
            } => Measurement::Counter {
                count: 2 * count,
                bits: 64,
                reference_ns,
            },
            other => other,
        })
        .collect();
    let mut single = Link::new(LinkConfig::new(Ratio::from_integer(48_000))).unwrap();
    let mut double = Link::new(LinkConfig::new(Ratio::from_integer(96_000))).unwrap();
    feed(&mut single, &plain, 0);
    feed(&mut double, &doubled, 0);
    let (a, b) = (single.estimate(301 * NS), double.estimate(301 * NS));
    assert!(
        (a.drift - b.drift).abs() < 0.1 * a.deviation,
        "{} {}",
        a.drift,
        b.drift
    );
}

#[test]
fn a_drift_added_to_the_clock_is_a_drift_added_to_the_estimate() {
    let added = 50e-6;
    let plain = readings("exchange", 300, 13);
    let faster: Vec<_> = plain
        .iter()
        .map(|m| match *m {
            Measurement::Exchange {
                t1_ns,
                t2_ns,
                t3_ns,
                t4_ns,
            } => {
                let fast = |ns: i64| ns + (ns as f64 * added).round() as i64;
                Measurement::Exchange {
                    t1_ns: fast(t1_ns),
                    t2_ns,
                    t3_ns,
                    t4_ns: fast(t4_ns),
                }
            }
            other => other,
        })
        .collect();
    // No prior to speak of, so that none pulls.
    let config = LinkConfig::new(Ratio::from_integer(48_000)).with_tolerance_ppm(100_000.0);
    let mut links = [0, 1].map(|_| Link::new(config.clone()).unwrap());
    feed(&mut links[0], &plain, 0);
    feed(&mut links[1], &faster, 0);
    let [a, b] = links.map(|link| link.estimate(301 * NS));
    assert!(
        (b.drift - a.drift - added).abs() < 0.1 * a.deviation,
        "{} {}",
        a.drift,
        b.drift
    );
}
