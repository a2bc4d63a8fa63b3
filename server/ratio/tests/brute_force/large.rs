//! Large bounds and targets: the 64-bit and 128-bit paths against big integers.

use num_bigint::BigUint;
use num_rational::Ratio;
use ratewright_ratio::{
    Bounds, Claim, Exact, MAX_BOUND, Region, Side, best, best_in, big, neighbours, residual,
    target_from_f64,
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
