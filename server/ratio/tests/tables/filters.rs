//! Filter lengths.

use ratewright_ratio::kaiser;

use crate::rows::{self, Row, whole};

fn number(row: &Row, column: &str) -> f64 {
    row[column]
        .parse()
        .unwrap_or_else(|_| panic!("{column} of {row:?}"))
}

fn is_close(shown: f64, wanted: f64, relative: f64) -> bool {
    (shown - wanted).abs() <= relative * wanted.abs()
}

#[test]
fn kaiser_window() {
    for row in rows::csv(include_str!("../data/kaiser_design.csv"), 98) {
        let (ripple, width) = (number(&row, "ripple_db"), number(&row, "width_of_nyquist"));
        let taps = whole(&row, "value");
        assert_eq!(kaiser::taps(ripple, width), taps, "{row:?}");
        assert!(
            is_close(kaiser::beta(ripple), number(&row, "beta"), 1e-12),
            "{row:?}"
        );
        assert!(
            is_close(
                kaiser::taps_estimate(ripple, width),
                number(&row, "taps_unrounded"),
                1e-12
            ),
            "{row:?}"
        );
        let reached = kaiser::attenuation_db(taps, width);
        assert!(
            is_close(reached, number(&row, "atten_at_value_db"), 1e-12),
            "{row:?}"
        );
    }
}

#[test]
fn polyphase_prototypes() {
    for row in rows::csv(include_str!("../data/polyphase_prototypes.csv"), 33) {
        let (l, m, ripple) = (
            whole(&row, "L"),
            whole(&row, "M"),
            number(&row, "ripple_db"),
        );
        let taps = kaiser::prototype_taps(l, m, ripple, number(&row, "rel_width"));
        assert_eq!(taps, whole(&row, "value"), "{row:?}");
        assert_eq!(taps.div_ceil(l), whole(&row, "taps_per_phase"), "{row:?}");
        assert!(
            is_close(kaiser::beta(ripple), number(&row, "beta"), 1e-12),
            "{row:?}"
        );
    }
}
