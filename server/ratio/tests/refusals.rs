//! Every refusal names the field, the value and what is accepted.

use num_rational::Ratio;
use ratewright_ratio::{
    Bounds, Cadence, Exact, Fraction, FrameCadence, FrameOrder, Interval, Lazy, Multiple, Region,
    Stepping, best_multiple, big, parse_rate, parse_target, stages, target_from_f64,
    target_from_rates,
};

/// The message of a refusal holds all of these.
fn says<T: std::fmt::Debug, E: std::fmt::Display>(result: Result<T, E>, parts: &[&str]) {
    let message = result
        .map(|value| format!("{value:?}"))
        .map_err(|error| error.to_string());
    let text = message.expect_err("it should have been refused");
    assert!(
        parts.iter().all(|part| text.contains(part)),
        "{text:?} should hold {parts:?}"
    );
}

#[test]
fn bounds_and_regions() {
    says(
        Bounds::new(0, 1),
        &["max_l", "is 0", "1 to 9223372036854775807"],
    );
    says(
        Bounds::new(1, 1 << 63),
        &["max_m", "9223372036854775808", "accepted"],
    );
    let wide = Bounds::new(1 << 21, 8).expect("in range");
    says(
        wide.with_largest_prime(7),
        &["max_l", "2097152", "1 to 1048576"],
    );
    says(
        wide.with_largest_prime(1),
        &["largest_prime", "is 1", "2 and above"],
    );
    says(Region::product(0), &["max_product", "is 0", "accepted"]);
    says(
        Region::weighted(3, 4, 6),
        &["max_cost", "is 6", "at least", "7"],
    );
}

#[test]
fn targets() {
    says(target_from_f64(f64::NAN), &["target", "NaN", "positive"]);
    says(target_from_f64(-2.5), &["-2.5", "positive finite"]);
    says(target_from_f64(1e300), &["1e300", "accepted"]);
    says(big::target_from_f64(f64::INFINITY), &["inf"]);
    let (zero, rate) = (Ratio::from_integer(0), Ratio::from_integer(48_000));
    says(
        target_from_rates(zero, rate),
        &["source", "0 Hz", "accepted"],
    );
    says(target_from_rates(rate, zero), &["sink", "0 Hz"]);
}

#[test]
fn rates() {
    let accepted = "44100, 44.1k or 44.1 kHz";
    for text in [
        "", "fast", "44,1k", "1e3", "-5", "48000*", "/3", "4 4", "5.", "k", "44.1kk", "Hz", "٤٨",
    ] {
        says(
            parse_rate(text),
            &[&format!("{text:?}"), "is not a number", accepted],
        );
    }
    says(
        parse_rate("48000/0"),
        &["\"48000/0\"", "divides by zero", accepted],
    );
    says(parse_rate("0.0"), &["is zero", accepted]);
    says(
        parse_rate("18446744073709551616"),
        &["more than 64 bits", accepted],
    );
    says(
        parse_target(&"9".repeat(40)),
        &["more than 128 bits", accepted],
    );
    says(
        parse_target(&format!("0.{}1", "0".repeat(50))),
        &["more than 128 bits"],
    );
}

#[test]
fn rates_are_exact() {
    let rate = |text| parse_rate(text).expect("a rate");
    assert_eq!(rate(" 44.1 kHz "), Ratio::from_integer(44_100));
    assert_eq!(rate("1.536M"), Ratio::from_integer(1_536_000));
    assert_eq!(rate("30000 / 1001"), Ratio::new(30_000, 1_001));
    assert_eq!(rate("44.1k*1000/1001"), Ratio::new(44_100_000, 1_001));
    assert_eq!(rate("0.1000"), Ratio::new(1, 10));
    // The way there may be wider than the result.
    assert_eq!(
        rate("18446744073709551615*18446744073709551615/18446744073709551615"),
        Ratio::from_integer(u64::MAX)
    );
}

#[test]
fn intervals_and_sequences() {
    let (one, two) = (Exact::from_integer(1), Exact::from_integer(2));
    says(
        Interval::closed(two, one),
        &["lo = 2", "hi = 1", "empty", "accepted"],
    );
    says(Interval::open(one, one), &["lo = 1", "closed"]);
    says(
        Interval::closed(one, Exact::new_raw(1, 0)),
        &["hi", "denominator 0"],
    );
    says(
        Interval::closed(Exact::from_integer(0), one),
        &["lo is 0", "accepted"],
    );
    let bounds = Bounds::new(8, 8).expect("in range");
    says(
        Cadence::new(&Exact::from_integer(9), &bounds),
        &["wanted 9", "between 1/8 and 8"],
    );
    says(
        Cadence::new(&Exact::new(3, 2), &bounds),
        &["3/2", "within the bounds"],
    );
    let pair = Cadence::of_pair(
        &Exact::new(1, 2),
        Fraction::from_integer(1),
        Fraction::from_integer(2),
    );
    says(pair, &["wanted 1/2", "low = 1", "high = 2"]);
    let cadence = Cadence::new(&Exact::new(1_000_037, 1_000_000), &bounds).expect("between");
    says(
        Lazy::new(cadence, &Exact::new(1, 1_000)),
        &["headroom is 1/1000", "at least"],
    );
    // Products of headroom and denominator beyond 128 bits: 2^-67 samples is too little all the same.
    let fine = Exact::new(0x19e_3779_b97f_4a7c_15f3_9cc1, 1 << 88);
    let wide = Bounds::new(1 << 31, 1 << 31).expect("in range");
    let cadence = Cadence::new(&fine, &wide).expect("between");
    says(
        Lazy::new(cadence, &Exact::new((1 << 53) - 1, 1 << 120)),
        &["headroom is 9007199254740991/", "at least"],
    );
    says(Stepping::new(&two, 1), &["phases is 1", "wanted ratio 2"]);
    let rate = Ratio::from_integer(48_000);
    says(
        FrameCadence::new(rate, Ratio::from_integer(0), FrameOrder::Nearest),
        &["frame_rate", "0"],
    );
    says(
        best_multiple(&two, Multiple::OfM(9), &bounds),
        &["m must be a multiple of 9", "at most 8", "1 to 8"],
    );
}

#[test]
fn stages_of_a_filter() {
    let spec = stages::FilterSpec {
        source_rate_hz: 44_100.0,
        passband_hz: 20_000.0,
        stopband_db: 100.0,
    };
    let ratio = Fraction::new(160, 147);
    let with = |change: fn(&mut stages::FilterSpec)| {
        let mut spec = spec;
        change(&mut spec);
        stages::least_work(ratio, &spec)
    };
    says(
        with(|spec| spec.passband_hz = 22_050.0),
        &["passband_hz", "22050", "below 22050"],
    );
    says(
        with(|spec| spec.source_rate_hz = f64::NAN),
        &["source_rate_hz", "NaN"],
    );
    says(
        with(|spec| spec.stopband_db = 7.0),
        &["stopband_db", "7", "21 to 240"],
    );
    says(
        stages::front(Fraction::new(1 << 17, 1), &spec),
        &["l is 131072", "1 to 65536"],
    );
    assert_eq!(
        stages::least_work(Fraction::new(1, 1), &spec).map(|chain| chain.stages.len()),
        Ok(0)
    );
}
