//! An atomic-grade clock: one reading a second for a day, 12 ns of noise.

use num_rational::Ratio;
use ratewright_timing::sim::{Clock, ClockModel, Delay, Path, PathModel, probe};
use ratewright_timing::{Link, LinkConfig, Oscillator, State};

const NS: i64 = 1_000_000_000;

/// Half-width and error of the drift after a day, both dimensionless.
fn after_a_day(oscillator: Oscillator, seed: u64) -> (f64, f64) {
    let model = ClockModel {
        drift: 3e-12,
        white_fm: 1e-23,
        walk_fm: 1e-34,
        ..ClockModel::crystal()
    };
    let mut clock = Clock::new(model, seed);
    let mut path = Path::new(
        PathModel::new(Delay::Normal { deviation_s: 12e-9 }),
        seed + 50,
    );
    // A counter of 1 GHz: its tick is below the noise.
    let hz = Ratio::from_integer(1_000_000_000);
    let mut link = Link::new(LinkConfig::new(hz).with_oscillator(oscillator)).unwrap();
    for i in 1..=86_400 {
        let reading = probe::counter(&mut clock, &mut path, hz, 64, i * NS).unwrap();
        link.observe(i as u64, &reading).unwrap();
    }
    let e = link.estimate(86_400 * NS);
    assert_eq!(e.state, State::Locked);
    (e.half_width(), (e.drift - clock.drift(86_400 * NS)).abs())
}

#[test]
fn an_atomic_clock_gets_the_narrow_interval_it_deserves_and_keeps_to_it() {
    for seed in 0..4 {
        let (half_width, error) = after_a_day(Oscillator::Atomic, seed);
        assert!(half_width <= 1e-11, "half-width {half_width}");
        assert!(error <= half_width, "error {error} beyond {half_width}");
    }
}

#[test]
fn a_plain_crystal_declared_gets_no_such_narrow_interval() {
    let (half_width, _) = after_a_day(Oscillator::Crystal, 9);
    assert!(half_width > 2e-11, "half-width {half_width}");
}
