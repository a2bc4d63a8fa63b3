//! A real microcontroller clock, read at each GPS second for an hour.
//!
//! The record's provenance and its known end rate are in `tests/data/README.md`: −5.4765 ppm is
//! the least-squares rate over the last 589 pulses, recomputed here from the record itself.

use num_rational::Ratio;
use ratewright_timing::{Link, LinkConfig, Measurement, State};

const RECORD: &str = include_str!("../../../tests/data/node_clock_at_gps_pps_1h.csv");

fn pulses() -> Vec<u64> {
    RECORD
        .lines()
        .skip(1)
        .map(|line| line.split(',').nth(1).unwrap().parse().unwrap())
        .collect()
}

/// Least-squares rate of the pulses against their seconds, ppm.
fn fitted_rate_ppm(pulses: &[u64]) -> f64 {
    let middle = (pulses.len() - 1) as f64 / 2.0;
    let (mut tt, mut tz) = (0.0, 0.0);
    for (i, &us) in pulses.iter().enumerate() {
        let t = i as f64 - middle;
        tt += t * t;
        tz += t * (us as f64 - 1e6 * i as f64);
    }
    tz / tt
}

#[test]
fn ends_within_a_fifth_of_a_ppm_of_its_known_rate() {
    let pulses = pulses();
    assert_eq!(pulses.len(), 3589);
    let known_ppm = fitted_rate_ppm(&pulses[3000..]);
    assert!(
        (known_ppm + 5.4764898851831605).abs() < 1e-6,
        "as published beside the record"
    );
    let mut link = Link::new(LinkConfig::new(Ratio::from_integer(1_000_000))).unwrap();
    let mut end_ns = 0;
    for (i, &count) in pulses.iter().enumerate() {
        end_ns = i as i64 * 1_000_000_000;
        let reading = Measurement::Counter {
            count,
            bits: 64,
            reference_ns: end_ns,
        };
        link.observe(i as u64, &reading).unwrap();
    }
    let e = link.estimate(end_ns);
    let (drift, low, high) = (e.drift * 1e6, e.low * 1e6, e.high * 1e6);
    assert_eq!(e.state, State::Locked);
    assert!((drift - known_ppm).abs() < 0.2, "{drift} ppm");
    assert!(low < known_ppm && known_ppm < high, "{low} to {high} ppm");
}

#[test]
fn a_day_without_readings_widens_the_interval_honestly() {
    let pulses = pulses();
    let mut link = Link::new(LinkConfig::new(Ratio::from_integer(1_000_000))).unwrap();
    for (i, &count) in pulses[..1800].iter().enumerate() {
        let reference_ns = i as i64 * 1_000_000_000;
        link.observe(
            i as u64,
            &Measurement::Counter {
                count,
                bits: 64,
                reference_ns,
            },
        )
        .unwrap();
    }
    // The second half hour is foretold, not measured.
    let e = link.estimate(3588 * 1_000_000_000);
    let known = 1e-6 * fitted_rate_ppm(&pulses[3000..]);
    assert_eq!(e.state, State::Holdover);
    assert!(e.low < known && known < e.high, "{} to {}", e.low, e.high);
    let later = link.estimate(86_400 * 1_000_000_000);
    assert!(later.half_width() > e.half_width());
}
