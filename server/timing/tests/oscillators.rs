//! A better oscillator, declared, gets the narrower interval it deserves, and a true one.

use num_rational::Ratio;
use ratewright_timing::sim::{Clock, ClockModel, Daily, Delay, Path, PathModel, probe};
use ratewright_timing::{Link, LinkConfig, Oscillator};

const NS: i64 = 1_000_000_000;
const SEEDS: u64 = 40;

/// Shares of true intervals and mean half-widths, ppm, of the declared kind and of a plain
/// crystal's on the same readings: each ten minutes from the second hour on, and at the end of
/// an hour without readings.
#[derive(Default)]
struct Tally {
    asked: f64,
    covered: [f64; 2],
    half_width: [f64; 2],
    gap_covered: [f64; 2],
    gap_half_width: [f64; 2],
}

fn model(amplitude: f64, walk_fm: f64, drift: f64, seed: u64) -> ClockModel {
    ClockModel {
        drift,
        walk_fm,
        daily: Some(Daily {
            amplitude,
            angle: seed as f64,
        }),
        ..ClockModel::crystal()
    }
}

fn tally(kind: Oscillator, model: impl Fn(u64) -> ClockModel) -> Tally {
    let hz = Ratio::from_integer(10_000_000);
    let mut tally = Tally::default();
    for seed in 0..SEEDS {
        let mut clock = Clock::new(model(seed), seed);
        let delay = Delay::Normal { deviation_s: 5e-6 };
        let mut path = Path::new(PathModel::new(delay), 1000 + seed);
        let mut links = [kind, Oscillator::Crystal]
            .map(|kind| Link::new(LinkConfig::new(hz).with_oscillator(kind)).unwrap());
        for i in 1..7200_i64 {
            let at_ns = 2 * i * NS;
            let reading = probe::counter(&mut clock, &mut path, hz, 48, at_ns).unwrap();
            for link in &mut links {
                link.observe(i as u64, &reading).unwrap();
            }
            if i < 3600 || i % 300 != 0 {
                continue;
            }
            tally.asked += 1.0;
            let truth = clock.drift(at_ns);
            for (k, link) in links.iter().enumerate() {
                let e = link.estimate(at_ns);
                tally.covered[k] += f64::from(u8::from(e.low <= truth && truth <= e.high));
                tally.half_width[k] += 1e6 * e.half_width();
            }
        }
        let later_ns = 18_000 * NS;
        let truth = clock.drift(later_ns);
        for (k, link) in links.iter().enumerate() {
            let e = link.estimate(later_ns);
            tally.gap_covered[k] += f64::from(u8::from(e.low <= truth && truth <= e.high));
            tally.gap_half_width[k] += 1e6 * e.half_width();
        }
    }
    for (covered, half_width) in tally.covered.iter_mut().zip(&mut tally.half_width) {
        (*covered, *half_width) = (*covered / tally.asked, *half_width / tally.asked);
    }
    let seeds = SEEDS as f64;
    tally.gap_covered = tally.gap_covered.map(|n| n / seeds);
    tally.gap_half_width = tally.gap_half_width.map(|h| h / seeds);
    tally
}

fn assert_deserved(t: &Tally) {
    // Two standard errors below 95 %, answers along one seed counting as three.
    assert!(t.covered[0] > 0.95 - 2.0 * (0.95 * 0.05 / (3.0 * 40.0_f64)).sqrt());
    assert!(t.gap_covered[0] > 0.95 - 2.0 * (0.95 * 0.05 / 40.0_f64).sqrt());
    assert!(t.half_width[0] < 0.8 * t.half_width[1]);
    assert!(t.gap_half_width[0] < 0.6 * t.gap_half_width[1]);
}

#[test]
fn a_compensated_oscillator_gets_a_narrower_interval_and_a_true_one() {
    let t = tally(Oscillator::Compensated, |seed| {
        model(0.1e-6, 3e-22, 1e-6, seed)
    });
    assert_deserved(&t);
}

#[test]
fn an_oven_oscillator_gets_a_narrower_interval_and_a_true_one() {
    let t = tally(Oscillator::Oven, |seed| model(1e-9, 1e-24, 0.2e-6, seed));
    assert_deserved(&t);
}
