//! Best approximation: by big integers on every row, by the fast paths where the target fits.

use num_bigint::BigUint;
use num_rational::Ratio;
use ratewright_ratio::{
    Best, Bounds, Claim, Exact, Fraction, MAX_BOUND, Region, Side, best, big, exact, ladder,
    target_from_f64,
};

use crate::rows::{self, Row, Skips, whole};

const ZERO: &str = "the nearest is 0, which is no ratio";
const NEGATIVE: &str = "negative target";
const FLOOR: &str = "the convergent is the floor, and the next integer is nearer";
const BEYOND: &str = "the nearest has parts beyond 2^63 - 1";

/// What the row expects, if it is a ratio this crate serves.
fn expected(row: &Row, skips: &mut Skips) -> Option<Fraction> {
    let value = &row["value"];
    if value.starts_with('-') {
        skips.note(NEGATIVE);
        return None;
    }
    let value = rows::big(value);
    if *value.numer() == BigUint::from(0u32) {
        // What this crate serves then is the least ratio there is.
        let bounds = Bounds::new(MAX_BOUND, whole(row, "max_den")).expect("in range");
        let (target, region) = (target(row), Region::from(&bounds));
        let least = Fraction::new(1, bounds.max_m());
        assert_eq!(big::best_in(&target, &region).ratio, least, "{row:?}");
        skips.note(ZERO);
        return None;
    }
    let part = |x: &BigUint| u64::try_from(x.clone()).ok().filter(|&x| x <= MAX_BOUND);
    let fraction = part(value.numer())
        .zip(part(value.denom()))
        .map(|(l, m)| Fraction::new(l, m));
    if fraction.is_none() {
        skips.note(BEYOND);
    }
    fraction
}

/// The target of a row, as big as it is.
fn target(row: &Row) -> Ratio<BigUint> {
    row.get("x_exact")
        .map_or_else(|| double(row).1, |text| rows::big(text))
}

fn double(row: &Row) -> (f64, Ratio<BigUint>) {
    let bits = u64::from_str_radix(row["x_bits"].trim_start_matches("0x"), 16).expect("hex");
    let x = f64::from_bits(bits);
    (x, big::target_from_f64(x).expect("positive"))
}

fn check(
    target: &Ratio<BigUint>,
    small: Option<Exact>,
    bounds: &Bounds,
    wanted: Fraction,
    row: &Row,
) {
    let region = Region::from(bounds);
    assert_eq!(big::best_in(target, &region).ratio, wanted, "{row:?}");
    let Some(small) = small else { return };
    let Best { ratio, certificate } = best(&small, bounds);
    assert_eq!(ratio, wanted, "{row:?}");
    let claim = Claim::Nearest {
        ratio,
        target: &small,
        region,
        side: Side::Either,
    };
    assert_eq!(certificate.verify(&claim), Ok(()), "{row:?}");
    let last = ladder(&small, bounds).last().map(|rung| rung.last());
    // The ladder ends at the nearest; on a tie at the first of the two.
    let as_near = last.is_some_and(|last| distance(last, target) == distance(wanted, target));
    assert!(as_near, "{row:?}: ladder ends at {last:?}");
}

fn distance(ratio: Fraction, target: &Ratio<BigUint>) -> Ratio<BigUint> {
    let ratio = Ratio::new(BigUint::from(*ratio.numer()), BigUint::from(*ratio.denom()));
    if ratio > *target {
        ratio - target
    } else {
        target - ratio
    }
}

#[test]
fn constants() {
    let mut skips = Skips::default();
    let mut checked = 0;
    for row in rows::csv(include_str!("../data/bestapprox_constants.csv"), 476) {
        let Some(wanted) = expected(&row, &mut skips) else {
            continue;
        };
        let bounds = Bounds::new(MAX_BOUND, whole(&row, "max_den")).expect("in range");
        let target = rows::big(&row["x_exact"]);
        check(&target, rows::exact(&row["x_exact"]), &bounds, wanted, &row);
        // The first kind is never farther than the last convergent, the best of the second kind.
        let convergent = if row["last_convergent"] == "=" {
            &row["value"]
        } else {
            &row["last_convergent"]
        };
        if let Some(convergent) = rows::exact(convergent).filter(|c| *c.denom() > 0) {
            let part = |x: u128| u64::try_from(x).expect("within the bounds");
            let convergent = Fraction::new(part(*convergent.numer()), part(*convergent.denom()));
            assert!(
                distance(wanted, &target) <= distance(convergent, &target),
                "{row:?}"
            );
        }
        checked += 1;
    }
    skips.close("bestapprox_constants", checked, &[(ZERO, 19)]);
}

#[test]
fn random_doubles() {
    let mut skips = Skips::default();
    let mut checked = 0;
    for row in rows::csv(include_str!("../data/bestapprox_random_f64.csv"), 3400) {
        let Some(wanted) = expected(&row, &mut skips) else {
            continue;
        };
        let (x, target) = double(&row);
        let bounds = Bounds::new(MAX_BOUND, whole(&row, "max_den")).expect("in range");
        check(&target, target_from_f64(x).ok(), &bounds, wanted, &row);
        checked += 1;
    }
    skips.close(
        "bestapprox_random_f64",
        checked,
        &[(BEYOND, 34), (ZERO, 288)],
    );
}

#[test]
fn ties() {
    let mut skips = Skips::default();
    let mut checked = 0;
    for row in rows::csv(include_str!("../data/bestapprox_ties.csv"), 356) {
        let Some(wanted) = expected(&row, &mut skips) else {
            continue;
        };
        let bounds = Bounds::new(MAX_BOUND, whole(&row, "max_den")).expect("in range");
        check(
            &rows::big(&row["x_exact"]),
            rows::exact(&row["x_exact"]),
            &bounds,
            wanted,
            &row,
        );
        checked += 1;
    }
    skips.close("bestapprox_ties", checked, &[(NEGATIVE, 2), (ZERO, 10)]);
}

#[test]
fn numerator_and_denominator_bounded() {
    for row in rows::csv(include_str!("../data/bestapprox_num_den_bounded.csv"), 306) {
        let wanted =
            expected(&row, &mut Skips::default()).expect("the box holds positive ratios only");
        let bounds = Bounds::new(whole(&row, "max_num"), whole(&row, "max_den")).expect("in range");
        check(
            &rows::big(&row["x_exact"]),
            rows::exact(&row["x_exact"]),
            &bounds,
            wanted,
            &row,
        );
    }
}

#[test]
fn smooth() {
    for row in rows::csv(include_str!("../data/bestapprox_smooth.csv"), 292) {
        let wanted =
            expected(&row, &mut Skips::default()).expect("the box holds positive ratios only");
        let bounds = Bounds::new(whole(&row, "max_num"), whole(&row, "max_den"))
            .and_then(|bounds| bounds.with_largest_prime(whole(&row, "max_prime")))
            .expect("in range");
        // The nearest only grows with the target, so a target of more than 128 bits is enclosed.
        for target in rows::enclosure(&row["x_exact"]) {
            assert_eq!(best(&target, &bounds).ratio, wanted, "{row:?}");
        }
    }
}

#[test]
fn continued_fractions() {
    let mut skips = Skips::default();
    let mut checked = 0;
    for record in rows::json(include_str!("../data/continued_fractions.json"), 29) {
        let Some(x) = record["x"].as_str() else {
            // The record of the Saturn gear names the convergents the maker chose from.
            let target = Exact::new(77_708_431, 2_640_858);
            assert_eq!(
                best(&target, &Bounds::new(206, 7).expect("in range")).ratio,
                Fraction::new(206, 7)
            );
            checked += 1;
            continue;
        };
        let target = decimal(x);
        for convergent in record["convergents"].as_array().expect("a list") {
            let text = convergent.as_str().expect("a fraction");
            let Some(c) =
                rows::exact(text).filter(|c| *c.numer() > 0 && *c.numer() <= MAX_BOUND.into())
            else {
                skips.note(if text.starts_with("0/") { ZERO } else { BEYOND });
                continue;
            };
            if *c.denom() > MAX_BOUND.into() {
                skips.note(BEYOND);
                continue;
            }
            // Lagrange: a convergent is nearest among all with its denominator or a smaller one, except that
            // the first, ⌊x⌋, may be farther than ⌊x⌋ + 1.
            let fraction = Fraction::new(*c.numer() as u64, *c.denom() as u64);
            if *fraction.denom() == 1
                && distance(fraction, &target) > distance(fraction + 1, &target)
            {
                skips.note(FLOOR);
                continue;
            }
            let bounds = Bounds::new(MAX_BOUND, *fraction.denom()).expect("in range");
            assert_eq!(
                big::best_in(&target, &Region::from(&bounds)).ratio,
                fraction,
                "{x}"
            );
            checked += 1;
        }
    }
    skips.close(
        "continued_fractions",
        checked,
        &[(FLOOR, 6), (BEYOND, 52), (ZERO, 13)],
    );
}

/// A fraction or a decimal number, exactly.
fn decimal(text: &str) -> Ratio<BigUint> {
    let Some((whole, decimals)) = text.split_once('.') else {
        return rows::big(text);
    };
    let digits: BigUint = format!("{whole}{decimals}").parse().expect("digits");
    Ratio::new(digits, BigUint::from(10u32).pow(decimals.len() as u32))
}

#[test]
fn exact_converts_without_change() {
    assert_eq!(exact(&Fraction::new(160, 147)), Exact::new(160, 147));
}
