//! Nominal rates: every pair is met exactly by its ratio in lowest terms.

use num_rational::Ratio;
use ratewright_ratio::{
    Bounds, Cadence, Exact, Fraction, MAX_SMOOTH_BOUND, best, parse_rate, residual,
    target_from_rates,
};

use crate::rows::{self, Skips, whole};

const LONG: &str = "the ratio has parts beyond the bounds that prime factors may be limited in";

/// The least bounds that hold `ratio` must give it exactly.
fn check(target: &Exact, ratio: Fraction) {
    let bounds = Bounds::new(*ratio.numer(), *ratio.denom()).expect("in range");
    let answer = best(target, &bounds);
    assert_eq!(answer.ratio, ratio);
    assert_eq!(residual(&answer.ratio, target), 0.0);
    assert!(Cadence::new(target, &bounds).is_err(), "one ratio does it");
}

fn fraction(text: &str) -> Fraction {
    let value = rows::exact(text).expect("fits");
    Fraction::new(*value.numer() as u64, *value.denom() as u64)
}

#[test]
fn audio_pairs() {
    let mut skips = Skips::default();
    let mut checked = 0;
    for row in rows::csv(include_str!("../data/rate_pairs_audio.csv"), 462) {
        let rate = |column: &str| parse_rate(&row[column]).expect("a rate");
        let target =
            target_from_rates(rate("in_hz_exact"), rate("out_hz_exact")).expect("positive");
        let ratio = fraction(&row["value"]);
        check(&target, ratio);
        // The largest prime factors say which bound on prime factors just lets the ratio pass.
        let largest = whole(&row, "L_max_prime")
            .max(whole(&row, "M_max_prime"))
            .max(2);
        if *ratio.numer().max(ratio.denom()) > MAX_SMOOTH_BOUND {
            skips.note(LONG);
            continue;
        }
        let bounds = Bounds::new(MAX_SMOOTH_BOUND, MAX_SMOOTH_BOUND).expect("in range");
        let with_prime = |prime| bounds.with_largest_prime(prime).expect("at least 2");
        assert!(with_prime(largest).allow(&ratio), "{row:?}");
        assert!(
            largest == 2 || !with_prime(largest - 1).allow(&ratio),
            "{row:?}"
        );
        checked += 1;
    }
    skips.close(
        "rate_pairs_audio (prime factors; all 462 ratios are checked)",
        checked,
        &[(LONG, 10)],
    );
}

#[test]
fn video_and_transport_pairs() {
    for row in rows::csv(include_str!("../data/rate_pairs_video_mpeg.csv"), 226) {
        let rate = |column: &str| parse_rate(&row[column]).expect("a rate");
        let target =
            target_from_rates(rate("in_hz_exact"), rate("out_hz_exact")).expect("positive");
        check(&target, fraction(&row["value"]));
    }
}

/// 128·f_s = f_TMDS·N/CTS, so N/CTS is the ratio from the TMDS clock to 128·f_s.
#[test]
fn hdmi_n_and_cts() {
    let table = rows::csv(include_str!("../data/hdmi_n_cts.csv"), 128);
    let mut inexact = 0;
    for row in &table {
        let tmds = parse_rate(&row["tmds_hz_exact"]).expect("a rate");
        let target = target_from_rates(tmds, Ratio::from_integer(128 * whole(row, "fs_hz")))
            .expect("positive");
        let shown = Fraction::new(whole(row, "N"), whole(row, "CTS"));
        let is_exact = residual(&shown, &target) == 0.0;
        assert_eq!(is_exact, row["exact"] == "True", "{row:?}");
        inexact += usize::from(!is_exact);
        // The relative error of the recovered rate is the residual.
        let (sign, size) = match row["rate_error_exact"].strip_prefix('-') {
            Some(size) => (-1.0, size),
            None => (1.0, row["rate_error_exact"].as_str()),
        };
        let size = rows::exact(size).expect("fits");
        let wanted = sign * *size.numer() as f64 / *size.denom() as f64;
        let shown = residual(&shown, &target);
        assert!(
            (shown - wanted).abs() <= 4.0 * f64::EPSILON * wanted.abs(),
            "{row:?}: {shown:e}"
        );
        if is_exact {
            let smallest = best(&target, &Bounds::new(1 << 40, 1 << 40).expect("in range")).ratio;
            assert!(whole(row, "N").is_multiple_of(*smallest.numer()), "{row:?}");
        }
    }
    assert!(inexact >= 1, "the misprint in the last row must not pass");
    assert_eq!(table.last().map(|row| row["exact"].as_str()), Some("False"));
}

#[test]
fn output_lengths() {
    for row in rows::csv(include_str!("../data/resample_lengths.csv"), 244) {
        let ratio = Fraction::new(whole(&row, "L"), whole(&row, "M"));
        let outputs = Ratio::from_integer(whole(&row, "n_in")) * ratio;
        assert_eq!(outputs.ceil().to_integer(), whole(&row, "value"), "{row:?}");
    }
}
