//! Certificates: over all quadruples of small bounds, what verifies is true.

use ratewright_ratio::{
    Bounds, Bracket, Certificate, Claim, Ends, Exact, Fraction, Interval, Node, Parents, Region,
    Side, SteppingPair, best, simplest,
};

use crate::oracle;

/// Largest part in a quadruple: one more than the bounds, so that ends outside are tried too.
const LARGEST: u64 = 6;

fn nodes(largest: u64) -> Vec<Node> {
    (0..=largest)
        .flat_map(|l| (0..=largest).map(move |m| Node { l, m }))
        .collect()
}

fn regions() -> Vec<Region> {
    let boxes = [(1, 1), (5, 5), (2, 5), (5, 3), (1, 4), (4, 1)];
    let boxes = boxes.map(|(l, m)| Region::from(&Bounds::new(l, m).expect("in range")));
    let products = [1, 5, 6].map(|max| Region::product(max).expect("in range"));
    let weighted =
        [(1, 1, 6), (2, 1, 8)].map(|(a, b, max)| Region::weighted(a, b, max).expect("in range"));
    boxes.into_iter().chain(products).chain(weighted).collect()
}

fn targets() -> Vec<Exact> {
    let small = (1..=7).flat_map(|n| (1..=7).map(move |d| Exact::new_raw(n, d)));
    let edges = [
        Exact::new(1, 1_000),
        Exact::new(1_000, 1),
        Exact::new(999, 1_000),
        Exact::new(1 << 90, (1 << 90) + 1),
    ];
    small.chain(edges).collect()
}

/// What the claim asks for, by looking at every ratio.
fn truth(target: &Exact, region: &Region, side: Side) -> Option<Fraction> {
    let ratios = oracle::allowed(8, 8, |l, m| region.contains(l, m));
    let (below, above) = oracle::flanks(target, &ratios);
    match side {
        Side::Either => Some(oracle::nearest(target, &ratios)),
        Side::Below => below,
        Side::Above => above,
    }
}

#[test]
fn nearest_and_neighbour_pairs() {
    let (nodes, mut accepted) = (nodes(LARGEST), 0);
    for region in regions() {
        for target in targets() {
            let truths = [Side::Either, Side::Below, Side::Above]
                .map(|side| (side, truth(&target, &region, side)));
            for (below, above) in nodes
                .iter()
                .flat_map(|&a| nodes.iter().map(move |&b| (a, b)))
            {
                let bracket = Bracket { below, above };
                for (side, truth) in truths {
                    for ratio in [below, above].into_iter().filter_map(Node::fraction) {
                        let claim = Claim::Nearest {
                            ratio,
                            target: &target,
                            region,
                            side,
                        };
                        if Certificate::Nearest(bracket).verify(&claim).is_ok() {
                            assert_eq!(Some(ratio), truth, "{bracket:?} {claim:?}");
                            accepted += 1;
                        }
                    }
                }
                check_pair(bracket, &target, region);
            }
        }
    }
    assert!(accepted > 1_000, "{accepted}");
}

/// A pair that verifies encloses the target, with nothing allowed strictly between.
fn check_pair(bracket: Bracket, target: &Exact, region: Region) {
    let (Some(low), Some(high)) = (bracket.below.fraction(), bracket.above.fraction()) else {
        return;
    };
    let claim = Claim::NeighbourPair {
        low,
        high,
        target,
        region,
    };
    if Certificate::NeighbourPair(bracket).verify(&claim).is_ok() {
        assert!(
            oracle::side(&low, target).is_le() && oracle::side(&high, target).is_ge(),
            "{claim:?}"
        );
        let between = oracle::allowed(8, 8, |l, m| region.contains(l, m))
            .into_iter()
            .find(|f| low < *f && *f < high);
        assert_eq!(between, None, "{claim:?}");
    }
}

#[test]
fn no_other_answer_passes_with_a_right_bracket() {
    let bounds = Bounds::new(5, 5).expect("in range");
    for target in targets() {
        let answer = best(&target, &bounds);
        for ratio in (0..=7).flat_map(|l| (1..=7).map(move |m| Fraction::new_raw(l, m))) {
            let claim = Claim::Nearest {
                ratio,
                target: &target,
                region: (&bounds).into(),
                side: Side::Either,
            };
            // As written: 2/2 is not accepted for 1/1.
            let is_same =
                (ratio.numer(), ratio.denom()) == (answer.ratio.numer(), answer.ratio.denom());
            assert_eq!(
                answer.certificate.verify(&claim).is_ok(),
                is_same,
                "{claim:?}"
            );
        }
    }
}

#[test]
fn simplest_in_every_small_interval() {
    let nodes = nodes(5);
    let points: Vec<Exact> = (1..=5)
        .flat_map(|n| (1..=5).map(move |d| Exact::new_raw(n, d)))
        .collect();
    for (&lo, &hi) in points
        .iter()
        .flat_map(|lo| points.iter().map(move |hi| (lo, hi)))
    {
        for ends in [Ends::Closed, Ends::Open, Ends::LowOpen, Ends::HighOpen] {
            let Ok(interval) = Interval::new(lo, hi, ends) else {
                continue;
            };
            let truth = simplest(&interval).map(|answer| answer.fraction);
            for (left, right) in nodes
                .iter()
                .flat_map(|&a| nodes.iter().map(move |&b| (a, b)))
            {
                if left.m + right.m == 0 {
                    continue;
                }
                let fraction = Fraction::new_raw(left.l + right.l, left.m + right.m);
                let claim = Claim::Simplest {
                    fraction,
                    interval: &interval,
                };
                if Certificate::Simplest(Parents { left, right })
                    .verify(&claim)
                    .is_ok()
                {
                    assert_eq!(Some(fraction), truth, "{interval:?}");
                }
            }
        }
    }
}

#[test]
fn stepping_pairs() {
    for target in targets() {
        for (phases, advance) in (0..=20).flat_map(|l| (0..=20).map(move |a| (l, a))) {
            let pair = SteppingPair { phases, advance };
            let claim = Claim::SteppingPair {
                pair,
                target: &target,
            };
            let encloses = phases > 0 && advance > 0 && {
                let low = Fraction::new(phases, advance + 1);
                let high = Fraction::new(phases, advance);
                oracle::side(&low, &target).is_le() && oracle::side(&high, &target).is_ge()
            };
            assert_eq!(
                Certificate::SteppingPair(pair).verify(&claim).is_ok(),
                encloses,
                "{claim:?}"
            );
        }
    }
}

#[test]
fn extreme_parts_are_refused_without_overflow() {
    let parts = [0, 1, 2, 1 << 62, u64::MAX - 1, u64::MAX];
    let nodes: Vec<Node> = parts
        .iter()
        .flat_map(|&l| parts.iter().map(move |&m| Node { l, m }))
        .collect();
    let targets = [
        Exact::new(1, 1),
        Exact::new(u128::MAX, 1),
        Exact::new(1, u128::MAX),
        Exact::new(u128::MAX, u128::MAX - 1),
    ];
    let bounds = Bounds::new(1 << 62, 1 << 62).expect("in range");
    let region = Region::from(&bounds);
    for target in targets {
        let interval = Interval::closed(target, target).expect("one point");
        let (nearest, point) = (
            best(&target, &bounds).ratio,
            simplest(&interval).map(|s| s.fraction),
        );
        for (&below, &above) in nodes.iter().flat_map(|a| nodes.iter().map(move |b| (a, b))) {
            for ratio in nodes
                .iter()
                .filter(|node| node.m > 0)
                .map(|node| Fraction::new_raw(node.l, node.m))
            {
                let bracket = Bracket { below, above };
                let pair = SteppingPair {
                    phases: below.l,
                    advance: below.m,
                };
                let claims = [
                    Claim::Nearest {
                        ratio,
                        target: &target,
                        region,
                        side: Side::Either,
                    },
                    Claim::Simplest {
                        fraction: ratio,
                        interval: &interval,
                    },
                    Claim::NeighbourPair {
                        low: ratio,
                        high: ratio,
                        target: &target,
                        region,
                    },
                    Claim::SteppingPair {
                        pair,
                        target: &target,
                    },
                ];
                let certificates = [
                    Certificate::Nearest(bracket),
                    Certificate::Simplest(Parents {
                        left: below,
                        right: above,
                    }),
                    Certificate::NeighbourPair(bracket),
                    Certificate::SteppingPair(pair),
                ];
                for (certificate, claim) in certificates.iter().zip(&claims) {
                    let is_true = match claim {
                        Claim::Nearest { ratio, .. } => *ratio == nearest,
                        Claim::Simplest { fraction, .. } => Some(*fraction) == point,
                        // Both ends are the same ratio here, which is no pair.
                        Claim::NeighbourPair { .. } => false,
                        Claim::SteppingPair { .. } => true,
                    };
                    assert!(
                        is_true || certificate.verify(claim).is_err(),
                        "{certificate:?} {claim:?}"
                    );
                }
            }
        }
    }
}
