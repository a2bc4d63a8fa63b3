//! Cadences, stepping and lazy switching against whole periods and all orders.

use num_rational::Ratio;
use ratewright_ratio::{Bounds, Cadence, CadenceError, Exact, Lazy, LazyError, Stepping, residual};

use crate::random::Random;

/// A cadence with a short period, if the case has one.
fn case(random: &mut Random, longest: u64) -> Option<Cadence> {
    let d = random.range(2, 400);
    let wanted = Exact::new(u128::from(random.range(1, 2 * d)), d.into());
    let cadence = Cadence::new(&wanted, &random.bounds()).ok()?;
    (cadence.period_blocks() <= longest).then_some(cadence)
}

#[test]
fn a_period_is_exact_and_the_bound_is_reached() {
    let (mut random, mut seen) = (Random::new(4), 0);
    for _ in 0..20_000 {
        let Some(cadence) = case(&mut random, 500) else {
            continue;
        };
        let (mut state, mut largest) = (cadence.start(), Ratio::from_integer(0));
        let (mut inputs, mut outputs, mut highs) = (0u128, 0u128, 0);
        let wanted = Ratio::new(
            *cadence.wanted().numer() as i128,
            *cadence.wanted().denom() as i128,
        );
        for _ in 0..cadence.period_blocks() {
            let block = state.next_block();
            inputs += u128::from(*block.denom());
            outputs += u128::from(*block.numer());
            highs += u64::from(block == cadence.high());
            let error = Ratio::from_integer(outputs as i128) - wanted * inputs as i128;
            assert_eq!(state.error_outputs(), error, "{cadence:?}");
            largest = largest.max(if error < Ratio::from_integer(0) {
                -error
            } else {
                error
            });
        }
        assert_eq!(Exact::new(outputs, inputs), *cadence.wanted());
        assert_eq!(
            (inputs, outputs),
            (cadence.period_inputs(), cadence.period_outputs())
        );
        assert_eq!(highs, cadence.high_blocks());
        assert_eq!(state, cadence.start(), "back at the start after a period");
        let bound = cadence.error_bound();
        assert_eq!(
            largest,
            Ratio::new(*bound.numer() as i128, *bound.denom() as i128),
            "{cadence:?}"
        );
        let shorter = u128::from(*cadence.low().denom().min(cadence.high().denom()));
        assert!(bound <= Exact::new(1, 2 * shorter), "{cadence:?}");
        seen += 1;
    }
    assert!(seen > 5_000, "{seen}");
}

/// The least over all orders of a period of the largest |error|, in units: by trying every order.
fn best_of_all_orders(up: i64, down: i64) -> i64 {
    fn walk(error: i64, ups: i64, downs: i64, worst: i64, (up, down): (i64, i64)) -> i64 {
        let worst = worst.max(error.abs());
        let higher = (ups > 0).then(|| walk(error + up, ups - 1, downs, worst, (up, down)));
        let lower = (downs > 0).then(|| walk(error - down, ups, downs - 1, worst, (up, down)));
        higher.into_iter().chain(lower).min().unwrap_or(worst)
    }
    walk(0, down, up, 0, (up, down))
}

#[test]
fn no_order_of_the_blocks_does_better() {
    let (mut random, mut seen) = (Random::new(5), 0);
    while seen < 400 {
        let Some(cadence) = case(&mut random, 14) else {
            continue;
        };
        let (up, down) = (cadence.low_blocks() as i64, cadence.high_blocks() as i64);
        assert_eq!(best_of_all_orders(up, down), (up + down) / 2, "{cadence:?}");
        seen += 1;
    }
}

#[test]
fn a_carried_error_is_kept_to_half_a_unit_and_worked_off() {
    let mut random = Random::new(6);
    for _ in 0..2_000 {
        let Some(cadence) = case(&mut random, 500) else {
            continue;
        };
        let numerator = i128::from(random.range(0, 4_000)) - 2_000;
        let carried = Ratio::new(numerator, 997);
        let mut state = cadence.start_from(carried).expect("in range");
        let off = state.error_outputs() - carried;
        let unit = Ratio::new(1, *cadence.wanted().denom() as i128);
        assert!(off <= unit / 2 && off >= -unit / 2, "{cadence:?} {carried}");
        for _ in 0..20_000 {
            state.next_block();
        }
        let error = state.error_outputs();
        let bound = cadence.error_bound();
        let bound = Ratio::new(*bound.numer() as i128, *bound.denom() as i128);
        assert!(error <= bound && error >= -bound, "{cadence:?} {carried}");
    }
}

#[test]
fn lazy_keeps_the_headroom_and_changes_as_often_as_estimated() {
    let (mut random, mut seen) = (Random::new(7), 0);
    while seen < 300 {
        let Some(cadence) = case(&mut random, 2_000) else {
            continue;
        };
        let headroom = Exact::new(random.range(1, 12).into(), 2);
        let mut lazy = match Lazy::new(cadence, &headroom) {
            Ok(lazy) => lazy,
            Err(LazyError::HeadroomTooSmall { least, .. }) => {
                assert!(headroom < least);
                continue;
            }
            Err(other) => panic!("{other}"),
        };
        let limit = Ratio::new(*headroom.numer() as i128, *headroom.denom() as i128);
        let (mut changes, mut inputs, mut last) = (0u64, 0u64, None);
        for _ in 0..40_000 {
            let block = lazy.next_block();
            let error = lazy.error_outputs();
            assert!(error <= limit && error >= -limit, "{cadence:?}");
            changes += u64::from(last.is_some_and(|last| last != block));
            inputs += block.denom();
            last = Some(block);
        }
        // The estimate counts whole holds; a hold is short by less than a block at either end.
        let estimate = lazy.switches_per_second(inputs as f64);
        let block_share = cadence.error_bound() / headroom;
        if block_share < Exact::new(1, 20) && estimate > 20.0 {
            let off = changes as f64 / estimate - 1.0;
            assert!(
                off.abs() < 0.15,
                "{cadence:?}: {changes} changes, estimated {estimate}"
            );
        }
        seen += 1;
    }
}

#[test]
fn lazy_returns_from_a_carried_error_and_stays() {
    let (mut random, mut seen) = (Random::new(9), 0);
    while seen < 300 {
        let Some(cadence) = case(&mut random, 500) else {
            continue;
        };
        let headroom = Exact::new(random.range(1, 12).into(), 2);
        let Ok(lazy) = Lazy::new(cadence, &headroom) else {
            continue;
        };
        let carried = Ratio::new(i128::from(random.range(0, 16_000)) - 8_000, 997);
        let mut lazy = lazy.start_from(carried).expect("in range");
        let off = lazy.error_outputs() - carried;
        let unit = Ratio::new(1, *cadence.wanted().denom() as i128);
        assert!(off <= unit / 2 && off >= -unit / 2, "{cadence:?} {carried}");
        let limit = Ratio::new(*headroom.numer() as i128, *headroom.denom() as i128);
        let size = |error: Ratio<i128>| error.max(-error);
        let mut last = size(lazy.error_outputs());
        let mut returned = last <= limit;
        for _ in 0..20_000 {
            lazy.next_block();
            let now = size(lazy.error_outputs());
            assert!(now <= limit || (!returned && now < last), "{cadence:?}");
            returned |= now <= limit;
            last = now;
        }
        seen += 1;
    }
}

#[test]
fn stepping_carries_an_error_to_half_a_unit_and_works_it_off() {
    let (mut random, mut seen) = (Random::new(10), 0);
    while seen < 1_000 {
        let d = random.range(1, 300);
        let wanted = Exact::new(u128::from(random.range(1, 2 * d)), d.into());
        let phases = random.range(2, 64);
        let Ok(stepping) = Stepping::new(&wanted, phases) else {
            continue;
        };
        let carried = Ratio::new(i128::from(random.range(0, 4_000)) - 2_000, 997);
        let exact_advance = stepping.advances().0 == stepping.advances().1;
        let Some(mut state) = stepping.start_from(carried) else {
            assert!(exact_advance, "{stepping:?} {carried}");
            continue;
        };
        let bound = stepping.error_bound();
        let bound = Ratio::new(*bound.numer() as i128, *bound.denom() as i128);
        let off = state.error_outputs() - carried;
        assert!(off <= bound && off >= -bound, "{stepping:?} {carried}");
        for _ in 0..100_000 {
            state.next_output();
        }
        let error = state.error_outputs();
        assert!(error <= bound && error >= -bound, "{stepping:?} {carried}");
        seen += 1;
    }
}

#[test]
fn stepping_is_exact_and_within_half_a_phase() {
    let mut random = Random::new(8);
    for _ in 0..3_000 {
        let d = random.range(1, 300);
        let wanted = Exact::new(u128::from(random.range(1, 2 * d)), d.into());
        let phases = random.range(2, 64);
        let Ok(stepping) = Stepping::new(&wanted, phases) else {
            continue;
        };
        let numer = *wanted.numer() as i128;
        let wanted_ratio = Ratio::new(numer, *wanted.denom() as i128);
        let (mut state, mut advanced) = (stepping.start(), 0i128);
        let mut largest = Ratio::from_integer(0);
        for output in 1..=numer {
            advanced += i128::from(state.next_output());
            let inputs = Ratio::new(advanced, phases.into());
            let error = Ratio::from_integer(output) - wanted_ratio * inputs;
            assert_eq!(state.error_outputs(), error, "{stepping:?}");
            largest = largest.max(if error < Ratio::from_integer(0) {
                -error
            } else {
                error
            });
        }
        let bound = stepping.error_bound();
        assert_eq!(
            largest,
            Ratio::new(*bound.numer() as i128, *bound.denom() as i128),
            "{stepping:?}"
        );
        assert!(bound <= wanted / Exact::from_integer(2 * u128::from(phases)));
        let claim = ratewright_ratio::Claim::SteppingPair {
            pair: ratewright_ratio::SteppingPair {
                phases,
                advance: stepping.advances().0,
            },
            target: &wanted,
        };
        assert_eq!(stepping.certificate().verify(&claim), Ok(()));
    }
}

#[test]
fn saved_states_continue_the_same_and_nonsense_is_refused() {
    let bounds = Bounds::new(256, 256).expect("in range");
    let cadence = Cadence::new(&Exact::new(1_000_037, 1_000_000), &bounds).expect("between");
    let mut state = cadence.start();
    (0..1_000).for_each(|_| {
        state.next_block();
    });
    let bytes = postcard::to_stdvec(&state).expect("plain data");
    let mut restored: ratewright_ratio::CadenceState =
        postcard::from_bytes(&bytes).expect("saved by us");
    assert_eq!(restored, state);
    assert!((0..1_000).all(|_| restored.next_block() == state.next_block()));
    let swapped = serde_json::json!({"wanted": [3, 2], "low": [2, 1], "high": [1, 1]});
    assert!(serde_json::from_value::<Cadence>(swapped).is_err());
}

#[test]
fn what_needs_no_cadence_says_so() {
    let bounds = Bounds::new(16, 16).expect("in range");
    let single = Cadence::new(&Exact::new(30, 20), &bounds);
    assert!(
        matches!(single, Err(CadenceError::SingleRatio { ratio }) if ratio == Ratio::new(3, 2))
    );
    for beyond in [Exact::new(17, 1), Exact::new(1, 17)] {
        let refused = Cadence::new(&beyond, &bounds);
        assert!(
            matches!(refused, Err(CadenceError::OutOfReach { .. })),
            "{refused:?}"
        );
    }
    let fine = Exact::new((1 << 120) + 1, 1 << 120);
    assert!(matches!(
        Cadence::new(&fine, &bounds),
        Err(CadenceError::TooFine { .. })
    ));
    assert!(residual(&Ratio::new(1, 1), &fine) < 0.0);
}
