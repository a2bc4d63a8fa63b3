//! Questions refused and answered.

use super::*;
use v1::plan_ratio_request::Limit;

fn hertz(numerator: u64) -> Option<v1::Rate> {
    Some(v1::Rate {
        numerator,
        denominator: 1,
    })
}

fn request() -> v1::PlanRatioRequest {
    v1::PlanRatioRequest {
        source_rate: hertz(44_100),
        sink_rate: hertz(48_000),
        ..Default::default()
    }
}

#[test]
fn nominal_rates_give_the_exact_target() {
    let question = question(request()).unwrap();
    assert_eq!(question.target, Exact::new(160, 147));
    let answer = answer(&question).unwrap();
    let best = answer.best.unwrap();
    assert_eq!(best.ratio, Some(v1::Ratio { l: 160, m: 147 }));
    assert!(best.exact && best.seconds_to_slip.is_none());
}

#[test]
fn a_fast_sink_raises_the_target() {
    let sent = v1::PlanRatioRequest {
        sink_drift: 1e-5,
        sink_drift_half_width: 1e-7,
        ..request()
    };
    let question = question(sent).unwrap();
    let target = question.target;
    let relative = *target.numer() as f64 / *target.denom() as f64 / (160.0 / 147.0) - 1.0;
    assert!((relative - 1e-5).abs() < 1e-15, "{relative}");
    let interval = question.interval.unwrap();
    assert!(interval.lo() < &target && &target < interval.hi());
}

#[test]
fn the_longest_rates_still_fit() {
    let sent = v1::PlanRatioRequest {
        source_rate: Some(v1::Rate {
            numerator: 999_999_999_989,
            denominator: 999_999_937,
        }),
        sink_rate: Some(v1::Rate {
            numerator: 999_999_999_961,
            denominator: 999_999_929,
        }),
        source_drift: 1.234_567e-5,
        sink_drift: -7.654_321e-6,
        ..Default::default()
    };
    assert!(question(sent).is_ok());
}

#[test]
fn faults_are_named() {
    let both = v1::PlanRatioRequest {
        target: Some(v1::Fraction::default()),
        ..request()
    };
    let zero = v1::PlanRatioRequest {
        target: Some(v1::Fraction {
            numerator: "1".into(),
            denominator: "0".into(),
        }),
        ..Default::default()
    };
    let wild = v1::PlanRatioRequest {
        max_l: 1 << 40,
        sink_drift: f64::NAN,
        ..request()
    };
    let filter = Some(v1::FilterWish {
        passband_hz: 20_000.0,
        attenuation_db: 100.0,
    });
    let without_rates = v1::PlanRatioRequest {
        target: Some(v1::Fraction {
            numerator: "1".into(),
            denominator: "1".into(),
        }),
        filter,
        frame_rate: hertz(25),
        ..Default::default()
    };
    let limited = |limit| v1::PlanRatioRequest {
        limit: Some(limit),
        ..request()
    };
    let replaced = v1::PlanRatioRequest {
        max_m: 64,
        ..limited(Limit::FixedM(64))
    };
    let with_prime = v1::PlanRatioRequest {
        largest_prime: 7,
        ..limited(Limit::LMultipleOf(6))
    };
    for (sent, fields) in [
        (without_rates, vec!["filter", "frame_rate"]),
        (replaced, vec!["max_m"]),
        (with_prime, vec!["largest_prime"]),
        (limited(Limit::FixedM(0)), vec!["fixed_m"]),
        (limited(Limit::PowerOfTwoM(false)), vec!["power_of_two_m"]),
        (both, vec!["target"]),
        (zero, vec!["target.denominator"]),
        (wild, vec!["max_l", "sink_drift"]),
        (
            v1::PlanRatioRequest::default(),
            vec!["source_rate", "sink_rate"],
        ),
    ] {
        let Refused::Invalid(violations) = question(sent).unwrap_err() else {
            panic!("a wrong field is a violation")
        };
        assert_eq!(
            violations
                .iter()
                .map(|v| v.field.as_str())
                .collect::<Vec<_>>(),
            fields
        );
    }
}

/// What can only be found wrong once the best ratio is known is named by its field too.
#[test]
fn faults_of_the_answer_are_named() {
    let limited = |limit| v1::PlanRatioRequest {
        limit: Some(limit),
        ..request()
    };
    let cost = |weight_l, max_cost| {
        limited(Limit::MaxCost(v1::WeightedLimit {
            weight_l,
            weight_m: 0,
            max_cost,
        }))
    };
    let filtered = |passband_hz, attenuation_db| v1::PlanRatioRequest {
        filter: Some(v1::FilterWish {
            passband_hz,
            attenuation_db,
        }),
        ..request()
    };
    let few_phases = v1::PlanRatioRequest {
        phases: 1,
        ..request()
    };
    for (sent, field, value, accepted) in [
        (
            limited(Limit::MaxProduct(0)),
            "max_product",
            "0",
            "1 to 9223372036854775807",
        ),
        (cost(7, 7), "max_cost.max_cost", "7", "at least 8"),
        (
            cost(u64::MAX, 7),
            "max_cost.weight_l",
            "18446744073709551615",
            "1 to",
        ),
        (
            limited(Limit::LMultipleOf(0)),
            "l_multiple_of",
            "0",
            "1 to 1024",
        ),
        (
            limited(Limit::MMultipleOf(1025)),
            "m_multiple_of",
            "1025",
            "1 to 1024",
        ),
        (
            filtered(22_050.0, 100.0),
            "filter.passband_hz",
            "22050",
            "below 22050 Hz",
        ),
        (
            filtered(f64::NAN, 100.0),
            "filter.passband_hz",
            "NaN",
            "below 22050 Hz",
        ),
        (
            filtered(20_000.0, 241.0),
            "filter.attenuation_db",
            "241",
            "21 to 240 dB",
        ),
        (few_phases, "phases", "1", "2 to 2^63 - 1"),
    ] {
        let Refused::Invalid(violations) = answer(&question(sent).unwrap()).unwrap_err() else {
            panic!("a wrong field is a violation")
        };
        let [violation] = &violations[..] else {
            panic!("one violation: {violations:?}")
        };
        assert_eq!(
            (violation.field.as_str(), violation.value.as_str()),
            (field, value)
        );
        assert!(violation.accepted.contains(accepted), "{violation}");
    }
}

#[test]
fn each_limit_is_answered_in_its_own_terms() {
    let best = |limit| {
        let sent = v1::PlanRatioRequest {
            limit: Some(limit),
            ..request()
        };
        let answer = answer(&question(sent).unwrap()).unwrap();
        let best = answer.best.unwrap();
        let last = answer.ladder.last().unwrap();
        assert_eq!(last.ratio, best.ratio, "the ladder ends at the best");
        let ratio = best.ratio.unwrap();
        (
            (ratio.l, ratio.m),
            best.certificate.unwrap().proof.unwrap(),
            answer.reduced,
        )
    };
    let weighted = v1::WeightedLimit {
        weight_l: 1,
        weight_m: 1,
        max_cost: 307,
    };
    for limit in [Limit::MaxProduct(160 * 147), Limit::MaxCost(weighted)] {
        let (ratio, proof, reduced) = best(limit);
        assert_eq!((ratio, reduced), ((160, 147), None));
        assert!(matches!(proof, v1::certificate::Proof::Nearest(_)));
    }
    let (ratio, proof, reduced) = best(Limit::LMultipleOf(320));
    assert_eq!(ratio, (320, 294));
    let reduced = reduced.unwrap();
    assert_eq!((reduced.max_l, reduced.max_m), (3, 1024));
    assert_eq!(reduced.ratio, Some(v1::Ratio { l: 1, m: 294 }));
    let v1::certificate::Proof::Nearest(bracket) = proof else {
        panic!("a bracket")
    };
    let exact = reduced.target.unwrap();
    assert_eq!(
        (exact.numerator.as_str(), exact.denominator.as_str()),
        ("1", "294")
    );
    assert!([bracket.below, bracket.above].contains(&Some(exact)));
    for (limit, ratio) in [
        (Limit::FixedM(65_536), (71_332, 65_536)),
        (Limit::PowerOfTwoM(true), (1_115, 1_024)),
    ] {
        let (found, proof, _) = best(limit);
        assert_eq!(found, ratio);
        assert!(matches!(proof, v1::certificate::Proof::Uncertified(_)));
    }
}

#[test]
fn wishes_are_answered_when_they_are_made() {
    let plain = answer(&question(request()).unwrap()).unwrap();
    assert!(plain.chains.is_empty() && plain.stepping.is_none() && plain.sink_frames.is_none());
    assert!(plain.ladder.iter().all(|rung| rung.coefficients == 0));

    let sent = v1::PlanRatioRequest {
        filter: Some(v1::FilterWish {
            passband_hz: 20_000.0,
            attenuation_db: 100.0,
        }),
        phases: 256,
        frame_rate: Some(v1::Rate {
            numerator: 30_000,
            denominator: 1_001,
        }),
        ..request()
    };
    let wishes = answer(&question(sent).unwrap()).unwrap();
    for chain in &wishes.chains {
        let product = |part: fn(&v1::Stage) -> u64| chain.stages.iter().map(part).product::<u64>();
        assert_eq!((product(|s| s.l), product(|s| s.m)), (160, 147));
    }
    assert!(wishes.chains.len() > 1);
    assert!(wishes.ladder.is_sorted_by_key(|rung| rung.coefficients));
    let stepping = wishes.stepping.unwrap();
    assert_eq!((stepping.advance, stepping.longer_advance), (235, 236));
    assert!(
        stepping.error_bound_samples > 0.0 && stepping.error_bound_samples <= 160.0 / 147.0 / 512.0
    );
    assert_eq!(
        wishes.sink_frames.unwrap().samples,
        [1602, 1601, 1602, 1601, 1602]
    );
    let source = wishes.source_frames.unwrap();
    assert_eq!(
        (source.period_frames, source.period_samples),
        (100, 147_147)
    );
    assert_eq!(source.samples[20..26], [1472, 1471, 1471, 1471, 1472, 1471]);
}

#[test]
fn both_sides_and_the_changes_of_a_pair_are_told() {
    let sent = v1::PlanRatioRequest {
        source_rate: hertz(48_000),
        sink_rate: hertz(48_000),
        sink_drift: 5e-6,
        max_l: 512,
        max_m: 512,
        headroom_samples: 16.0,
        ..Default::default()
    };
    let found = answer(&question(sent).unwrap()).unwrap();
    let side = |side: &Option<v1::Candidate>| side.as_ref().unwrap().ratio.unwrap();
    assert_eq!(side(&found.below), v1::Ratio { l: 1, m: 1 });
    assert_eq!(side(&found.above), v1::Ratio { l: 512, m: 511 });
    // 1/1 takes 2 · 4 samples across the swing at 5 ppm of 48 kHz; 512/511 brings back one
    // sample a block, in a moment.
    let lazy = found.lazy.unwrap();
    // A quarter of the headroom, in whole units of the cadence.
    assert!(lazy.swing_samples <= 4.0 && lazy.swing_samples > 3.99);
    assert_eq!(lazy.cadence, found.cadence);
    let cycle_s = 8.0 / (48_000.0 * 5e-6);
    let per_second = found.lazy_changes_per_second.unwrap();
    assert!(
        (per_second * cycle_s / 2.0 - 1.0).abs() < 0.01,
        "{per_second}"
    );
    assert!(found.cadence_changes_per_second.unwrap() > 4.0 * per_second);

    // Half a sample is more than a headroom of 0.1 takes, and without rates nobody knows the time.
    let sent = v1::PlanRatioRequest {
        target: Some(v1::Fraction {
            numerator: "200001".to_owned(),
            denominator: "200000".to_owned(),
        }),
        max_l: 512,
        max_m: 512,
        headroom_samples: 0.1,
        ..Default::default()
    };
    let found = answer(&question(sent).unwrap()).unwrap();
    assert!(found.cadence.is_some() && found.lazy.is_none());
    assert_eq!(found.cadence_changes_per_second, None);
}
