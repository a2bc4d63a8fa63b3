//! The properties: each draws a case and compares the crate with the oracle.

use ratewright_ratio::{
    Bounds, Claim, Ends, Exact, Fraction, Interval, Multiple, Node, Region, Side, SmoothTable,
    around, best, best_above, best_below, best_for_m, best_in, best_multiple, best_power_of_two,
    front, is_nearest_for_m, ladder, ladder_in, neighbours, outward, residual, simplest,
};

use crate::oracle;
use crate::random::Random;

pub(crate) type Property = fn(&mut Random) -> Result<(), String>;

/// Each property with its share of the cases, in thousandths: the first is cheap, and gets most of them.
pub(crate) const PROPERTIES: [(&str, u64, Property); 13] = [
    ("all denominators", 880, nearest_over_all_denominators),
    ("box", 10, nearest_in_box),
    ("regions", 10, nearest_in_regions),
    ("smooth", 10, nearest_smooth),
    ("smooth table", 10, smooth_table),
    ("one-sided", 10, one_sided),
    ("around", 10, neighbours_of_a_member),
    ("multiples", 10, multiples),
    ("fixed and power of two", 10, accumulators),
    ("simplest", 10, simplest_of_interval),
    ("ladder", 10, ladder_is_the_front),
    ("front", 10, front_of_a_cost),
    ("outward", 10, outward_in_order),
];

fn check<T: PartialEq + std::fmt::Debug>(
    shown: T,
    wanted: T,
    case: &impl std::fmt::Debug,
) -> Result<(), String> {
    if shown == wanted {
        Ok(())
    } else {
        Err(format!("{case:?}: {shown:?}, wanted {wanted:?}"))
    }
}

fn in_box(bounds: &Bounds) -> Vec<Fraction> {
    oracle::allowed(bounds.max_l(), bounds.max_m(), |_, _| true)
}

fn nearest_over_all_denominators(random: &mut Random) -> Result<(), String> {
    let target = random.target();
    let (max_l, max_m) = (random.range(1, 40), random.range(1, 40));
    let bounds = Bounds::new(max_l, max_m).map_err(|e| e.to_string())?;
    let answer = best(&target, &bounds);
    let wanted = oracle::nearest_over_all_denominators(&target, max_l, max_m);
    check(answer.ratio, wanted, &(target, bounds))?;
    let claim = Claim::Nearest {
        ratio: wanted,
        target: &target,
        region: (&bounds).into(),
        side: Side::Either,
    };
    check(answer.certificate.verify(&claim), Ok(()), &(target, bounds))
}

fn nearest_in_box(random: &mut Random) -> Result<(), String> {
    let (target, bounds) = (random.target(), random.bounds());
    let case = (target, bounds);
    let ratios = in_box(&bounds);
    let answer = best(&target, &bounds);
    let wanted = oracle::nearest(&target, &ratios);
    check(answer.ratio, wanted, &case)?;
    let claim = Claim::Nearest {
        ratio: wanted,
        target: &target,
        region: (&bounds).into(),
        side: Side::Either,
    };
    check(answer.certificate.verify(&claim), Ok(()), &case)?;
    let sign = residual(&wanted, &target).partial_cmp(&0.0);
    check(sign, Some(oracle::side(&wanted, &target)), &case)?;
    let bracket = neighbours(&target, &bounds);
    let (below, above) = oracle::flanks(&target, &ratios);
    let is_member = below.is_some() && below == above;
    if is_member {
        let ends = [bracket.below.fraction(), bracket.above.fraction()];
        return check(ends.contains(&below), true, &case);
    }
    check(
        (bracket.below.fraction(), bracket.above.fraction()),
        (below, above),
        &case,
    )
}

fn nearest_in_regions(random: &mut Random) -> Result<(), String> {
    let target = random.target();
    let (a, b) = (random.range(1, 5), random.range(1, 5));
    let limit = random.range(a + b, 60);
    let product = Region::product(limit).map_err(|e| e.to_string())?;
    let weighted = Region::weighted(a, b, limit).map_err(|e| e.to_string())?;
    for region in [product, weighted] {
        let ratios = oracle::allowed(limit, limit, |l, m| region.contains(l, m));
        let wanted = oracle::nearest(&target, &ratios);
        let answer = best_in(&target, &region);
        check(answer.ratio, wanted, &(target, region))?;
        let claim = Claim::Nearest {
            ratio: wanted,
            target: &target,
            region,
            side: Side::Either,
        };
        check(answer.certificate.verify(&claim), Ok(()), &(target, region))?;
    }
    Ok(())
}

fn nearest_smooth(random: &mut Random) -> Result<(), String> {
    let (target, bounds, prime) = (random.target(), random.bounds(), random.range(2, 11));
    let smooth = bounds
        .with_largest_prime(prime)
        .map_err(|e| e.to_string())?;
    let allow = |l, m| oracle::is_smooth(l, prime) && oracle::is_smooth(m, prime);
    let ratios = oracle::allowed(bounds.max_l(), bounds.max_m(), allow);
    check(
        best(&target, &smooth).ratio,
        oracle::nearest(&target, &ratios),
        &(target, smooth),
    )
}

fn smooth_table(random: &mut Random) -> Result<(), String> {
    let (bounds, prime) = (random.bounds(), random.range(2, 11));
    let smooth = bounds
        .with_largest_prime(prime)
        .map_err(|e| e.to_string())?;
    let (lo, hi) = (random.target(), random.target());
    let Ok(band) = Interval::closed(lo.min(hi), lo.max(hi)) else {
        return Ok(());
    };
    let table = SmoothTable::new(&smooth, &band);
    for _ in 0..4 {
        let target = random.target();
        check(
            table.best(&target).ratio,
            best(&target, &smooth).ratio,
            &(target, smooth, band),
        )?;
    }
    Ok(())
}

fn one_sided(random: &mut Random) -> Result<(), String> {
    let (target, bounds) = (random.target(), random.bounds());
    let region = Region::from(&bounds);
    let (below, above) = oracle::flanks(&target, &in_box(&bounds));
    let answers = [
        (best_below(&target, &region), below, Side::Below),
        (best_above(&target, &region), above, Side::Above),
    ];
    for (answer, wanted, side) in answers {
        check(answer.map(|best| best.ratio), wanted, &(target, bounds))?;
        if let Some(best) = answer {
            let claim = Claim::Nearest {
                ratio: best.ratio,
                target: &target,
                region,
                side,
            };
            check(best.certificate.verify(&claim), Ok(()), &(target, bounds))?;
        }
    }
    Ok(())
}

fn neighbours_of_a_member(random: &mut Random) -> Result<(), String> {
    let bounds = random.bounds();
    let (l, m) = (
        random.range(1, bounds.max_l()),
        random.range(1, bounds.max_m()),
    );
    let target = Exact::new_raw(l.into(), m.into());
    let mut ratios = in_box(&bounds);
    ratios.retain(|ratio| oracle::side(ratio, &target).is_ne());
    let shown = around(&target, &Region::from(&bounds)).ok_or("the target is in the box")?;
    let ends = (shown.below.fraction(), shown.above.fraction());
    check(ends, oracle::flanks(&target, &ratios), &(target, bounds))
}

fn multiples(random: &mut Random) -> Result<(), String> {
    let (target, bounds, k) = (random.target(), random.bounds(), random.range(1, 6));
    for multiple in [Multiple::OfL(k), Multiple::OfM(k)] {
        let bound = if multiple == Multiple::OfL(k) {
            bounds.max_l()
        } else {
            bounds.max_m()
        };
        let answer = best_multiple(&target, multiple, &bounds);
        if k > bound {
            check(answer.is_err(), true, &(target, bounds, multiple))?;
            continue;
        }
        let answer = answer.map_err(|e| e.to_string())?;
        let pairs = (1..=bounds.max_m()).flat_map(|m| (1..=bounds.max_l()).map(move |l| (l, m)));
        let wanted = pairs
            .filter(|&(l, m)| {
                if multiple == Multiple::OfL(k) {
                    l % k == 0
                } else {
                    m % k == 0
                }
            })
            .min_by(|&(a, b), &(c, d)| {
                let fraction = Fraction::new_raw;
                oracle::compare(&target, &fraction(a, b), &fraction(c, d)).then((b, a).cmp(&(d, c)))
            });
        check(
            Some((answer.l, answer.m)),
            wanted,
            &(target, bounds, multiple),
        )?;
        let claim = Claim::Nearest {
            ratio: answer.reduced.ratio,
            target: &answer.target,
            region: (&answer.bounds).into(),
            side: Side::Either,
        };
        check(
            answer.reduced.certificate.verify(&claim),
            Ok(()),
            &(target, bounds, multiple),
        )?;
    }
    Ok(())
}

fn accumulators(random: &mut Random) -> Result<(), String> {
    let (target, bounds) = (random.target(), random.bounds());
    let (m, max_l) = (bounds.max_m(), bounds.max_l());
    let row: Vec<Fraction> = (1..=max_l).map(|l| Fraction::new_raw(l, m)).collect();
    let wanted = *oracle::nearest(&target, &row).numer();
    check(best_for_m(&target, m, max_l), wanted, &(target, bounds))?;
    for l in 0..=max_l + 1 {
        check(
            is_nearest_for_m(l, &target, m, max_l),
            l == wanted,
            &(target, bounds, l),
        )?;
    }
    let grid = oracle::allowed(max_l, m, |_, m| m.is_power_of_two());
    check(
        best_power_of_two(&target, &bounds),
        oracle::nearest(&target, &grid),
        &(target, bounds),
    )
}

fn simplest_of_interval(random: &mut Random) -> Result<(), String> {
    let (a, b) = (random.target(), random.target());
    let ends =
        [Ends::Closed, Ends::Open, Ends::LowOpen, Ends::HighOpen][random.range(0, 3) as usize];
    let Ok(interval) = Interval::new(a.min(b), a.max(b), ends) else {
        return Ok(());
    };
    let answer = simplest(&interval);
    // Every ratio with parts up to 40 that is inside, the simplest of them first.
    let inside = (1..=40).flat_map(|m| (1..=40).map(move |l| Fraction::new_raw(l, m)));
    let wanted = inside
        .filter(|f| interval.contains(f))
        .min_by_key(|f| (*f.denom(), *f.numer()));
    let in_reach = answer
        .map(|s| s.fraction)
        .filter(|f| *f.numer() <= 40 && *f.denom() <= 40);
    check(in_reach, wanted, &interval)?;
    if let Some(answer) = answer {
        let claim = Claim::Simplest {
            fraction: answer.fraction,
            interval: &interval,
        };
        check(answer.certificate.verify(&claim), Ok(()), &interval)?;
    }
    Ok(())
}

fn ladder_is_the_front(random: &mut Random) -> Result<(), String> {
    let (target, bounds) = (random.target(), random.bounds());
    let ratios = in_box(&bounds);
    let is_beaten = |ratio: &Fraction| {
        ratios.iter().any(|other| {
            let is_smaller = other.numer() <= ratio.numer() && other.denom() <= ratio.denom();
            other != ratio && is_smaller && oracle::compare(&target, other, ratio).is_le()
        })
    };
    let mut wanted: Vec<Fraction> = ratios
        .iter()
        .filter(|ratio| !is_beaten(ratio))
        .copied()
        .collect();
    wanted.sort_by_key(|ratio| ratio.numer() + ratio.denom());
    let rungs = ladder(&target, &bounds);
    check(
        &ladder_in(&target, &Region::from(&bounds)),
        &rungs,
        &(target, bounds),
    )?;
    let shown = rungs
        .iter()
        .flat_map(|rung| (0..rung.count).filter_map(|i| rung.ratio(i)));
    check(shown.collect(), wanted, &(target, bounds))
}

fn front_of_a_cost(random: &mut Random) -> Result<(), String> {
    let (target, mut bounds) = (random.target(), random.bounds());
    let (a, b) = (random.range(0, 3), random.range(0, 3));
    let cost = |l: u64, m: u64| (a * l + b * m).max(l * m / 4);
    let prime = random.range(2, 30);
    if prime < 12 {
        bounds = bounds
            .with_largest_prime(prime)
            .map_err(|e| e.to_string())?;
    }
    let mut ratios = in_box(&bounds);
    ratios.retain(|ratio| bounds.allow(ratio));
    let price = |ratio: &Fraction| cost(*ratio.numer(), *ratio.denom());
    let mut costs: Vec<u64> = ratios.iter().map(price).collect();
    costs.sort_unstable();
    costs.dedup();
    let mut wanted: Vec<Fraction> = Vec::new();
    for limit in costs {
        let affordable: Vec<Fraction> = ratios
            .iter()
            .filter(|r| price(r) <= limit)
            .copied()
            .collect();
        let nearest = oracle::nearest(&target, &affordable);
        if wanted
            .last()
            .is_none_or(|last| oracle::compare(&target, &nearest, last).is_lt())
        {
            wanted.push(nearest);
        }
    }
    let shown: Vec<Fraction> = front(&target, &bounds, cost)
        .map(|point| point.ratio)
        .collect();
    // Of two ratios equally near and equally dear either may stand.
    let same = shown.len() == wanted.len()
        && shown
            .iter()
            .zip(&wanted)
            .all(|(s, w)| price(s) == price(w) && oracle::compare(&target, s, w).is_eq());
    if same {
        Ok(())
    } else {
        Err(format!(
            "{target} {bounds:?} {a} {b}: {shown:?}, wanted {wanted:?}"
        ))
    }
}

fn outward_in_order(random: &mut Random) -> Result<(), String> {
    let (target, bounds) = (random.target(), random.bounds());
    let mut wanted = in_box(&bounds);
    wanted.sort_by(|a, b| {
        oracle::compare(&target, a, b).then((a.denom(), a.numer()).cmp(&(b.denom(), b.numer())))
    });
    check(
        outward(&target, &bounds).collect(),
        wanted,
        &(target, bounds),
    )?;
    check(
        Node::ZERO.fraction().or(Node::INFINITY.fraction()),
        None,
        &"sentinels",
    )
}
