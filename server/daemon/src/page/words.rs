//! Numbers and states in words.

use num_rational::Ratio;
use ratewright_control::{CrossingState, Realised, Reason};
use ratewright_ratio::Fraction;
use ratewright_timing::State;

/// A minus sign as wide as a plus, so that columns of signed numbers line up.
fn signed(text: String) -> String {
    text.replace('-', "\u{2212}")
}

/// A drift in parts per million, signed, to a tenth of a part per billion.
pub(super) fn ppm(drift: f64) -> String {
    signed(format!("{:+.4}", drift * 1e6))
}

/// A half-width in parts per million, with as many digits as say something.
pub(super) fn half_width_ppm(half_width: f64) -> String {
    match half_width * 1e6 {
        wide if wide >= 10.0 => format!("{wide:.0}"),
        wide if wide >= 1.0 => format!("{wide:.2}"),
        narrow => format!("{narrow:.4}"),
    }
}

/// A residual in parts per billion, signed.
pub(super) fn ppb(residual: f64) -> String {
    match residual * 1e9 {
        none if none.abs() < 0.005 => "0".to_owned(),
        some => signed(format!("{some:+.2}")),
    }
}

/// A number of samples, signed.
pub(super) fn samples(value: f64) -> String {
    signed(format!("{value:+.2}"))
}

/// A span of time in the two largest units that say something.
pub(super) fn span(seconds: f64) -> String {
    if !seconds.is_finite() {
        return "for ever".to_owned();
    }
    let whole = seconds.max(0.0).round() as u64;
    match whole {
        0..60 => format!("{whole} s"),
        60..3_600 => format!("{} min {:02} s", whole / 60, whole % 60),
        3_600..86_400 => format!("{} h {:02} min", whole / 3_600, whole % 3_600 / 60),
        _ => format!("{} d {:02} h", whole / 86_400, whole % 86_400 / 3_600),
    }
}

/// A rate with the unit that keeps it short; exact.
pub(super) fn rate(hz: Ratio<u64>) -> String {
    let (mut numerator, denominator) = (*hz.numer(), *hz.denom());
    let mut unit = "Hz";
    for larger in ["kHz", "MHz", "GHz"] {
        // A fraction, or one that would need more than two decimals, stays as it is.
        if denominator != 1 || numerator < 1_000 || numerator % 10 != 0 {
            break;
        }
        if numerator % 1_000 != 0 {
            return format!("{} {larger}", numerator as f64 / 1_000.0);
        }
        (numerator, unit) = (numerator / 1_000, larger);
    }
    match denominator {
        1 => format!("{numerator} {unit}"),
        _ => format!("{numerator}/{denominator} {unit}"),
    }
}

/// What a resampler runs.
pub(super) fn runs(realised: &Realised) -> String {
    let blocks =
        |blocks: u64, ratio: Fraction| format!("{blocks}\u{a0}\u{d7}\u{a0}{}", fraction(ratio));
    match realised {
        Realised::Single(ratio) => fraction(*ratio),
        Realised::Cadence(cadence) => format!(
            "{} and {}",
            blocks(cadence.low_blocks(), cadence.low()),
            blocks(cadence.high_blocks(), cadence.high())
        ),
        Realised::Stepping(stepping) => {
            let (short, long) = stepping.advances();
            format!("{short} or {long} of {} phases", stepping.phases())
        }
        Realised::Lazy { cadence, .. } => format!(
            "{} and {}, each held",
            fraction(cadence.low()),
            fraction(cadence.high())
        ),
    }
}

fn fraction(ratio: Fraction) -> String {
    format!("{}/{}", ratio.numer(), ratio.denom())
}

/// Why a setting was made.
pub(super) fn why(reason: Reason) -> &'static str {
    match reason {
        Reason::First => "the crossing was declared",
        Reason::Evidence => "the one before no longer fitted what is measured",
        Reason::Recovery => "to bring the phase error back",
        Reason::Declaration => "a declaration changed",
        Reason::Group => "its group changed",
        Reason::ChangeOver => "the stream comes from another source",
        Reason::Renewal => "reviewed, and nothing had to change",
    }
}

/// A state as a word, and the class that colours it.
pub(super) fn clock_state(state: State) -> (&'static str, &'static str) {
    match state {
        State::FreeRunning => ("free-running", "adrift"),
        State::Acquiring => ("acquiring", "nearing"),
        State::Locked => ("locked", "sound"),
        State::Holdover => ("holdover", "fading"),
    }
}

/// A state as a word, and the class that colours it.
pub(super) fn crossing_state(state: CrossingState) -> (&'static str, &'static str) {
    match state {
        CrossingState::Waiting => ("waiting", "nearing"),
        CrossingState::Holding => ("holding", "sound"),
        CrossingState::Degraded => ("degraded", "fading"),
        CrossingState::OutOfBounds => ("out of bounds", "adrift"),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn rates_are_exact_and_short() {
        let cases = [
            (Ratio::from_integer(48_000), "48 kHz"),
            (Ratio::from_integer(44_100), "44.1 kHz"),
            (Ratio::from_integer(11_025), "11025 Hz"),
            (Ratio::from_integer(25), "25 Hz"),
            (Ratio::new(30_000, 1001), "30000/1001 Hz"),
            (Ratio::from_integer(27_000_000), "27 MHz"),
            (Ratio::from_integer(1_000_000_000), "1 GHz"),
        ];
        for (hz, expected) in cases {
            assert_eq!(rate(hz), expected);
        }
    }

    #[test]
    fn spans_read_well() {
        let spans = [0.4, 59.0, 61.0, 3_600.0, 90_000.0, f64::INFINITY].map(span);
        assert_eq!(
            spans,
            [
                "0 s",
                "59 s",
                "1 min 01 s",
                "1 h 00 min",
                "1 d 01 h",
                "for ever"
            ]
        );
    }
}
