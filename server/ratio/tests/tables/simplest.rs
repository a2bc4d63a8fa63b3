//! The simplest fraction in an interval. Intervals below zero are reflected, which the tie rule
//! (smallest |p|) allows.

use ratewright_ratio::{Claim, Ends, Exact, Interval, IntervalError, simplest};

use crate::rows::{self, Skips};

const ZERO: &str = "zero is inside, which is no ratio";

#[test]
fn simplest_in_interval() {
    let mut skips = Skips::default();
    let mut checked = 0;
    for row in rows::csv(include_str!("../data/simplest_in_interval.csv"), 279) {
        let (lo, hi, value) = (&row["lo"], &row["hi"], &row["value"]);
        let ends = match row["ends"].as_str() {
            "[]" => Ends::Closed,
            "()" => Ends::Open,
            "(]" => Ends::LowOpen,
            "[)" => Ends::HighOpen,
            other => panic!("{other}"),
        };
        if value.starts_with("0/") {
            let interval = rows::exact(lo)
                .zip(rows::exact(hi))
                .map(|(lo, hi)| Interval::new(lo, hi, ends));
            assert!(
                matches!(interval, None | Some(Err(IntervalError::HoldsZero))),
                "{row:?}"
            );
            skips.note(ZERO);
            continue;
        }
        let (low, high) = match (lo.strip_prefix('-'), hi.strip_prefix('-')) {
            (Some(lo), Some(hi)) => (hi, lo),
            _ => (lo.as_str(), hi.as_str()),
        };
        let part = |text| rows::exact(text).unwrap_or_else(|| panic!("128 bits: {row:?}"));
        let interval = Interval::new(part(low), part(high), ends);
        checked += 1;
        if value == "none" {
            assert!(
                matches!(
                    interval,
                    Err(IntervalError::Empty { .. } | IntervalError::HoldsZero)
                ),
                "{row:?}"
            );
            continue;
        }
        let interval = interval.expect("not empty");
        let answer = simplest(&interval).unwrap_or_else(|| panic!("beyond 63 bits: {row:?}"));
        let wanted = part(value.trim_start_matches('-'));
        assert_eq!(ratewright_ratio::exact(&answer.fraction), wanted, "{row:?}");
        let claim = Claim::Simplest {
            fraction: answer.fraction,
            interval: &interval,
        };
        assert_eq!(answer.certificate.verify(&claim), Ok(()), "{row:?}");
    }
    skips.close("simplest_in_interval", checked, &[(ZERO, 8)]);
}

#[test]
fn an_interval_narrower_than_63_bits_has_no_answer() {
    let x = Exact::new((1 << 100) + 1, 1 << 100);
    let point = Interval::closed(x, x).expect("one point");
    assert_eq!(simplest(&point), None);
}
