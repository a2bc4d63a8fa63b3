//! The public functions on any input: no panic, no overflow, certificates that verify, and the answers of
//! the big-integer path. From `server/ratio`: `cargo +nightly fuzz run public_functions`.
#![no_main]

use arbitrary::Arbitrary;
use libfuzzer_sys::fuzz_target;
use num_bigint::BigUint;
use num_rational::Ratio;
use ratewright_ratio::{
    Bounds, Bracket, Cadence, Certificate, Claim, Ends, Exact, Fraction, FrameCadence, FrameOrder, Interval, Lazy, MAX_BOUND,
    Multiple, Node, Parents, Region, Side, Stepping, SteppingPair, around, best, best_above, best_below, best_for_m,
    best_in, best_multiple, best_of_many, best_power_of_two, big, front, is_nearest_for_m, ladder, neighbours,
    outward, parse_rate, parse_target, plan, residual, simplest, stages, target_from_f64, target_from_rates,
};

#[derive(Arbitrary, Debug)]
struct Input<'a> {
    n: u128,
    d: u128,
    hi: (u128, u128),
    max_l: u64,
    max_m: u64,
    prime: u8,
    nodes: [(u64, u64); 3],
    double: f64,
    ends: u8,
    text: &'a str,
}

fuzz_target!(|input: Input<'_>| {
    let _ = (parse_rate(input.text), parse_target(input.text));
    doubles(input.double);
    let _ = Bounds::new(input.max_l, input.max_m);
    let bounds = Bounds::new(input.max_l.clamp(1, MAX_BOUND), input.max_m.clamp(1, MAX_BOUND));
    let bounds = bounds.expect("clamped");
    if input.d == 0 {
        return;
    }
    let target = Exact::new_raw(input.n, input.d);
    nearest(&target, &bounds);
    constrained(&target, &bounds, u64::from(input.prime));
    intervals(&target, &input);
    sequences(&target, &bounds, &input);
    certificates(&target, &bounds, &input);
});

fn doubles(x: f64) {
    let small = target_from_f64(x);
    let large = big::target_from_f64(x);
    if let (Ok(small), Ok(large)) = (&small, &large) {
        assert_eq!(as_big(small), *large);
    }
    assert!(small.is_err() || large.is_ok());
    let bounds = Bounds::new(1_024, 1_024).expect("in range");
    let mut answers = [Fraction::new(1, 1)];
    if best_of_many(&[x], &bounds, &mut answers).is_ok() {
        let large = large.expect("a target if the batch took it");
        assert_eq!(answers[0], big::best_in(&large, &Region::from(&bounds)).ratio);
    }
}

fn as_big(target: &Exact) -> Ratio<BigUint> {
    Ratio::new((*target.numer()).into(), (*target.denom()).into())
}

fn nearest(target: &Exact, bounds: &Bounds) {
    let region = Region::from(bounds);
    let answer = best(target, bounds);
    let large = as_big(target);
    assert_eq!(answer, big::best_in(&large, &region));
    assert_eq!(neighbours(target, bounds), big::neighbours_in(&large, &region));
    let ratio = answer.ratio;
    let claim = |ratio, side| Claim::Nearest { ratio, target, region, side };
    assert_eq!(answer.certificate.verify(&claim(ratio, Side::Either)), Ok(()));
    let shown = residual(&ratio, target);
    assert!(*target.numer() == 0 || shown.is_finite());
    for (side, answer) in [(Side::Below, best_below(target, &region)), (Side::Above, best_above(target, &region))] {
        if let Some(answer) = answer {
            assert_eq!(answer.certificate.verify(&claim(answer.ratio, side)), Ok(()));
        }
    }
    let _ = around(target, &region);
    if *target.numer() > 0 {
        let rungs = ladder(target, bounds);
        let last = rungs.last().expect("at least the nearest").last();
        // The ladder ends as near as the nearest; on a tie with the first of the two.
        assert!(last == ratio || residual(&last, target).abs() >= shown.abs() * 0.999);
        assert!(outward(target, bounds).next() == Some(ratio));
        assert!(front(target, bounds, |l, m| l.saturating_add(m)).take(100).count() > 0);
    }
}

fn constrained(target: &Exact, bounds: &Bounds, prime: u64) {
    let (max_l, max_m) = (bounds.max_l(), bounds.max_m());
    let regions = [Region::product(max_l), Region::weighted(1 + prime, 1 + max_m % 1_000, max_l)];
    for region in regions.into_iter().flatten() {
        let answer = best_in(target, &region);
        assert_eq!(answer, big::best_in(&as_big(target), &region));
        let claim = Claim::Nearest { ratio: answer.ratio, target, region, side: Side::Either };
        assert_eq!(answer.certificate.verify(&claim), Ok(()));
    }
    for multiple in [Multiple::OfL(prime), Multiple::OfM(prime)] {
        if let Ok(answer) = best_multiple(target, multiple, bounds) {
            assert!(answer.l <= max_l && answer.m <= max_m);
        }
    }
    let l = best_for_m(target, max_m, max_l);
    assert!(is_nearest_for_m(l, target, max_m, max_l));
    assert!(bounds.allow(&best_power_of_two(target, bounds)));
    let small = Bounds::new(max_l % 500 + 1, max_m % 500 + 1).expect("in range");
    if let Ok(smooth) = small.with_largest_prime(prime) {
        assert!(smooth.allow(&best(target, &smooth).ratio));
    }
    let query = plan::Query {
        target: *target,
        bounds: small,
        headroom_samples: 1.0,
        sink_rate_hz: Some(Ratio::from_integer(48_000)),
    };
    let planned = plan::plan(&query);
    // Fronts of stages are slow for parts with many divisors.
    if prime == 0 {
        let spec = stages::FilterSpec { source_rate_hz: 48_000.0, passband_hz: 18_000.0, stopband_db: 100.0 };
        let _ = stages::front(planned.best.ratio, &spec);
    }
}

fn intervals(target: &Exact, input: &Input<'_>) {
    let ends = [Ends::Closed, Ends::Open, Ends::LowOpen, Ends::HighOpen][usize::from(input.ends % 4)];
    if input.hi.1 == 0 {
        return;
    }
    let Ok(interval) = Interval::new(*target, Exact::new_raw(input.hi.0, input.hi.1), ends) else { return };
    if let Some(answer) = simplest(&interval) {
        assert!(interval.contains(&answer.fraction));
        let claim = Claim::Simplest { fraction: answer.fraction, interval: &interval };
        assert_eq!(answer.certificate.verify(&claim), Ok(()));
    }
}

fn sequences(target: &Exact, bounds: &Bounds, input: &Input<'_>) {
    if let Ok(cadence) = Cadence::new(target, bounds) {
        let mut state = cadence.start();
        for _ in 0..50 {
            state.next_block();
            let (error, bound) = (state.error_outputs(), cadence.error_bound());
            // Both are in lowest terms of the same unit, so no comparison overflows.
            assert!(error.numer().unsigned_abs() as f64 / *error.denom() as f64
                <= *bound.numer() as f64 / *bound.denom() as f64 * (1.0 + 1e-12));
        }
        let carried = Ratio::new_raw(input.nodes[0].0 as i64 as i128, i128::from(input.nodes[0].1).max(1));
        let _ = cadence.start_from(carried).map(|mut state| state.next_block());
        if let Ok(mut lazy) = Lazy::new(cadence, &Exact::new_raw(input.n, input.d)) {
            for _ in 0..50 {
                lazy.next_block();
                let _ = lazy.error_outputs();
            }
        }
        let _ = cadence.certificate(bounds);
    }
    if let Ok(stepping) = Stepping::new(target, bounds.max_l()) {
        let mut state = stepping.start();
        for _ in 0..50 {
            state.next_output();
            let _ = state.error_outputs();
        }
        let pair = SteppingPair { phases: stepping.phases(), advance: stepping.advances().0 };
        assert_eq!(stepping.certificate().verify(&Claim::SteppingPair { pair, target }), Ok(()));
    }
    let [a, b, _] = input.nodes;
    if a.1 > 0 && b.1 > 0 {
        let (audio, frames) = (Ratio::new_raw(a.0, a.1), Ratio::new_raw(b.0, b.1));
        let _ = target_from_rates(audio, frames);
        for order in [FrameOrder::Nearest, FrameOrder::Floor, FrameOrder::Ceiling, FrameOrder::Smpte272m] {
            let _ = FrameCadence::new(audio, frames, order).map(|cadence| cadence.samples_in(input.max_l));
        }
    }
}

fn certificates(target: &Exact, bounds: &Bounds, input: &Input<'_>) {
    let [a, b, c] = input.nodes.map(|(l, m)| Node { l, m });
    let ratio = Fraction::new_raw(c.l, c.m);
    let region = Region::from(bounds);
    let nearest = Claim::Nearest { ratio, target, region, side: Side::Either };
    if Certificate::Nearest(Bracket { below: a, above: b }).verify(&nearest).is_ok() {
        assert_eq!(ratio, best(target, bounds).ratio);
    }
    let pair = Claim::NeighbourPair { low: ratio, high: ratio, target, region };
    let _ = Certificate::NeighbourPair(Bracket { below: a, above: b }).verify(&pair);
    let stepping = SteppingPair { phases: a.l, advance: a.m };
    let _ = Certificate::SteppingPair(stepping).verify(&Claim::SteppingPair { pair: stepping, target });
    if let Ok(interval) = Interval::closed(*target, *target) {
        let claim = Claim::Simplest { fraction: ratio, interval: &interval };
        let _ = Certificate::Simplest(Parents { left: a, right: b }).verify(&claim);
    }
}
