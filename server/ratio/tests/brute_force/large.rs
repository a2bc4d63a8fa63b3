//! Large bounds and targets: the 64-bit and 128-bit paths against big integers.

use num_bigint::BigUint;
use num_rational::Ratio;
use ratewright_ratio::{
    BatchError, Bounds, Claim, Exact, MAX_BOUND, Region, Side, around, best, best_in, best_of_many,
    best_power_of_two, big, is_nearest_for_m, neighbours, residual, target_from_f64,
};

use crate::random::Random;

fn wide(random: &mut Random) -> u128 {
    let any = u128::from(random.next()) << 64 | u128::from(random.next());
    (any >> random.range(0, 127)).max(1)
}

fn bounds(random: &mut Random) -> Bounds {
    let mut bound = || (random.next() >> random.range(1, 63)).clamp(1, MAX_BOUND);
    Bounds::new(bound(), bound()).expect("in range")
}

fn as_big(target: &Exact) -> Ratio<BigUint> {
    Ratio::new((*target.numer()).into(), (*target.denom()).into())
}

#[test]
fn all_number_types_agree() {
    let mut random = Random::new(1);
    for case in 0..60_000 {
        let mut target = Exact::new_raw(wide(&mut random), wide(&mut random));
        if case % 3 == 0 {
            // Near 1, where clocks live.
            let d = wide(&mut random).max(1 << 20);
            target = Exact::new_raw(d - d / u128::from(random.range(1_000, 1 << 40)), d);
        }
        let bounds = bounds(&mut random);
        let region = Region::from(&bounds);
        let answer = best(&target, &bounds);
        assert_eq!(
            answer,
            big::best_in(&as_big(&target), &region),
            "{target} {bounds:?}"
        );
        assert_eq!(
            neighbours(&target, &bounds),
            big::neighbours_in(&as_big(&target), &region)
        );
        let claim = Claim::Nearest {
            ratio: answer.ratio,
            target: &target,
            region,
            side: Side::Either,
        };
        assert_eq!(
            answer.certificate.verify(&claim),
            Ok(()),
            "{target} {bounds:?}"
        );
        let other = Region::product(bounds.max_l()).expect("in range");
        assert_eq!(
            best_in(&target, &other),
            big::best_in(&as_big(&target), &other),
            "{target} {other:?}"
        );
    }
}

#[test]
fn residuals_agree_with_big_integers() {
    let mut random = Random::new(2);
    for _ in 0..60_000 {
        let target = Exact::new_raw(wide(&mut random), wide(&mut random));
        let ratio = best(&target, &bounds(&mut random)).ratio;
        let made = BigUint::from(*ratio.numer()) * *target.denom();
        let wanted = BigUint::from(*ratio.denom()) * *target.numer();
        let (sign, difference) = if made >= wanted {
            (1.0, &made - &wanted)
        } else {
            (-1.0, &wanted - &made)
        };
        // The quotient to 80 bits and more, then rounded once.
        let shift = (wanted.bits() + 80).saturating_sub(difference.bits());
        let scaled: BigUint = (difference << shift) / wanted;
        let exact = sign
            * num_traits::ToPrimitive::to_f64(&scaled).expect("finite")
            * 2f64.powi(-(shift as i32));
        let shown = residual(&ratio, &target);
        assert!(
            (shown - exact).abs() <= 2.0 * f64::EPSILON * exact.abs(),
            "{ratio} {target}: {shown:e} {exact:e}"
        );
    }
}

#[test]
fn doubles_agree_with_big_integers() {
    let mut random = Random::new(3);
    let mut served = 0;
    for _ in 0..30_000 {
        let x = f64::from_bits(random.next() & !(1 << 63));
        let (Ok(target), Ok(wanted)) = (target_from_f64(x), big::target_from_f64(x)) else {
            continue;
        };
        assert_eq!(as_big(&target), wanted, "{x:e}");
        served += 1;
    }
    assert!(served > 2_000, "{served}");
    let edges = [
        f64::NAN,
        f64::INFINITY,
        -1.0,
        0.0,
        -0.0,
        f64::MIN_POSITIVE,
        5e-324,
        f64::MAX,
        2f64.powi(128),
    ];
    assert!(edges.iter().all(|&x| target_from_f64(x).is_err()));
    assert!(target_from_f64(2f64.powi(127)).is_ok() && target_from_f64(2f64.powi(-127)).is_ok());
}

#[test]
fn many_at_once_give_the_same_as_one_by_one() {
    let mut random = Random::new(9);
    for round in 0..400 {
        let bounds = match round % 4 {
            0 => bounds(&mut random),
            1 => random.bounds().with_largest_prime(5).expect("in range"),
            _ => Bounds::new(random.range(1, 1 << 20), random.range(1, 2_048)).expect("in range"),
        };
        let mut values = Vec::new();
        for _ in 0..random.range(0, 70) {
            let unit = (random.next() >> 11) as f64 / (1u64 << 53) as f64;
            values.push(match random.range(0, 5) {
                0 => f64::from_bits(random.range(1, f64::INFINITY.to_bits() - 1)),
                // Ratios of small numbers: within the bounds, and midpoints.
                1 => random.range(1, 64) as f64 / random.range(1, 64) as f64,
                2 => random.range(1, 99) as f64 / 64.0,
                3 => 1.0 + (unit - 0.5) * 1e-4,
                _ => 8.0 * unit + f64::MIN_POSITIVE,
            });
        }
        let mut answers = vec![Ratio::new(1, 1); values.len()];
        best_of_many(&values, &bounds, &mut answers).expect("positive values");
        for (&x, &answer) in values.iter().zip(&answers) {
            let wanted = match (target_from_f64(x), bounds.largest_prime()) {
                (Ok(target), _) => best(&target, &bounds).ratio,
                (Err(_), None) => {
                    let target = big::target_from_f64(x).expect("positive");
                    big::best_in(&target, &Region::from(&bounds)).ratio
                }
                (Err(_), Some(_)) => continue,
            };
            assert_eq!(answer, wanted, "{x:e} {bounds:?}");
        }
    }
}

#[test]
fn a_refused_batch_names_the_value_and_leaves_the_answers() {
    let bounds = Bounds::new(16, 16).expect("in range");
    let untouched = [Ratio::new(5, 7); 2];
    let mut answers = untouched;
    for bad in [f64::NAN, f64::INFINITY, 0.0, -1.0] {
        let refused = best_of_many(&[1.0, bad], &bounds, &mut answers);
        assert!(
            matches!(refused, Err(BatchError::Target { index: 1, .. })),
            "{refused:?}"
        );
    }
    let refused = best_of_many(&[1.0], &bounds, &mut answers);
    assert_eq!(
        refused,
        Err(BatchError::Length {
            targets: 1,
            answers: 2
        })
    );
    assert_eq!(answers, untouched);
}

/// Both were met by the fuzzer.
#[test]
fn edges_of_the_bounds() {
    let widest = Bounds::new(MAX_BOUND, MAX_BOUND).expect("in range");
    let huge = Exact::from_integer(u128::MAX);
    assert_eq!(
        best_power_of_two(&huge, &widest),
        Ratio::from_integer(MAX_BOUND)
    );
    assert!(is_nearest_for_m(MAX_BOUND, &huge, u64::MAX, u64::MAX));
    assert_eq!(
        around(&Exact::from_integer(0), &Region::from(&widest)),
        None
    );
}
