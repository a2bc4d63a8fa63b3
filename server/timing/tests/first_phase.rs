//! Phase at the first reading, as the readings after it show it, and how phase and drift err
//! together.

use num_rational::Ratio;
use ratewright_timing::sim::{Clock, ClockModel, Delay, Path, PathModel, probe};
use ratewright_timing::{Link, LinkConfig};

const NS: i64 = 1_000_000_000;

/// Errors of what one world's link says after so many seconds.
struct Errors {
    /// Of the gain since the first reading, ns: by `first_phase_ns`, and by the reading itself.
    gain: f64,
    raw_gain: f64,
    /// Of the drift.
    drift: f64,
    /// What is claimed, ns and dimensionless.
    first_deviation: f64,
    phase_deviation: f64,
    deviation: f64,
    covariance: f64,
}

/// Normal errors: with no tail, location and mean are one, so that truth is where it seems.
fn errors(seed: u64, seconds: i64, two_way: bool) -> Errors {
    let model = PathModel {
        least_s: 1e-3,
        ..PathModel::new(Delay::Normal { deviation_s: 20e-6 })
    };
    let mut clock = Clock::new(
        ClockModel {
            drift: 11e-6,
            ..ClockModel::crystal()
        },
        seed,
    );
    let (mut out, mut back) = (
        Path::new(model.clone(), seed + 1),
        Path::new(model, seed + 2),
    );
    // A tick of 0.1 µs is nothing beside the noise.
    let hz = Ratio::from_integer(10_000_000);
    let mut link = Link::new(LinkConfig::new(hz)).unwrap();
    let mut first = None;
    for i in 1..=seconds {
        let reading = if two_way {
            probe::exchange(&mut clock, &mut out, &mut back, i * NS)
        } else {
            probe::counter(&mut clock, &mut out, hz, 64, i * NS)
        };
        let reading = reading.expect("nothing is lost here");
        if first.is_none() {
            // Asked for now: the simulated clock wanders on and does not come back.
            first = Some(clock.phase_s(reading.reference_ns()));
        }
        link.observe(i as u64, &reading).unwrap();
    }
    let at_ns = seconds * NS + NS / 2;
    let e = link.estimate(at_ns);
    let gain_ns = (clock.phase_s(at_ns) - first.expect("there was one")) * 1e9;
    Errors {
        gain: e.phase_ns - e.first_phase_ns - gain_ns,
        raw_gain: e.phase_ns - gain_ns,
        first_deviation: e.first_phase_deviation_ns,
        drift: e.drift - clock.drift(at_ns),
        phase_deviation: e.phase_deviation_ns,
        deviation: e.deviation,
        covariance: e.phase_drift_covariance_ns,
    }
}

#[test]
fn what_was_gained_since_the_first_reading_is_known_better_than_the_first_reading() {
    for (two_way, seconds) in [(false, 300), (false, 2000), (true, 2000)] {
        let (mut square, mut claimed, mut raw) = (0.0, 0.0, 0.0);
        let seeds = 40;
        for seed in 0..seeds {
            let e = errors(seed * 10, seconds, two_way);
            square += e.gain * e.gain;
            raw += e.raw_gain * e.raw_gain;
            claimed +=
                e.phase_deviation * e.phase_deviation + e.first_deviation * e.first_deviation;
        }
        assert!(
            square < 0.4 * raw,
            "two-way {two_way}: {square} against {raw} from the first reading itself"
        );
        let ratio = square / claimed;
        assert!(
            (0.3..2.0).contains(&ratio),
            "two-way {two_way}, {seconds} s: errors over what was claimed, squared, {ratio}"
        );
    }
}

#[test]
fn phase_and_drift_err_together_as_claimed() {
    let (mut seen, mut claimed) = (0.0, 0.0);
    for seed in 0..60 {
        let e = errors(1000 + seed * 10, 400, false);
        assert!(e.covariance.abs() <= e.phase_deviation * e.deviation);
        seen += e.gain * e.drift;
        claimed += e.covariance;
    }
    let ratio = seen / claimed;
    assert!((0.4..2.5).contains(&ratio), "{seen} against {claimed}");
}
