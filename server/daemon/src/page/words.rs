//! Numbers and states in words.

use maud::{Markup, PreEscaped, html};
use num_rational::Ratio;
use ratewright_control::{CrossingState, HouseNs, Realised, Reason};
use ratewright_pictures::{Picture, Standing};
use ratewright_ratio::Fraction;
use ratewright_timing::{Reason as StateReason, State};

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

/// A part of one with the unit that keeps it short, to three figures.
pub(super) fn parts(part: f64) -> String {
    let (factor, unit) = match part.abs() {
        small if small < 1e-6 => (1e9, "ppb"),
        small if small < 1e-2 => (1e6, "ppm"),
        _ => (1e2, "%"),
    };
    format!("{}\u{a0}{unit}", small(part.abs() * factor))
}

/// How many blocks of the lower and of the higher ratio there are, as far as numbers of them say
/// anything.
pub(super) fn shares(low: u64, high: u64) -> String {
    match low.saturating_add(high) {
        0..=1_000_000 => format!("{low} and {high} blocks of them"),
        all => {
            let (fewer, which) = if low < high {
                (low, "first")
            } else {
                (high, "second")
            };
            // Where one is rare, percents would say that it never runs.
            let one_in = all as f64 / fewer.max(1) as f64;
            if one_in >= 100.0 {
                format!("the {which} in 1 of {one_in:.0} blocks")
            } else {
                format!(
                    "{:.2} and {:.2} of every 100 blocks",
                    100.0 * low as f64 / all as f64,
                    100.0 * high as f64 / all as f64
                )
            }
        }
    }
}

/// A number above 0, to three figures or a little more.
pub(super) fn small(value: f64) -> String {
    if value == 0.0 || !value.is_finite() {
        return format!("{value}");
    }
    let places = (2.0 - value.abs().log10().floor()).clamp(0.0, 12.0) as usize;
    format!("{value:.places$}")
}

/// A bound of an error, to three figures or a little more: never shown smaller than it is.
pub(super) fn at_most(bound: f64) -> String {
    let nearest = small(bound);
    if !bound.is_finite() || nearest.parse().is_ok_and(|shown: f64| shown >= bound) {
        return nearest;
    }
    let places = nearest
        .split_once('.')
        .map_or(0, |(_, places)| places.len());
    format!("{:.places$}", bound + 10_f64.powi(-(places as i32)))
}

/// A short time with the unit that keeps it short.
pub(super) fn seconds(seconds: f64) -> String {
    let units = [(1.0, "s"), (1e-3, "ms"), (1e-6, "\u{b5}s"), (1e-9, "ns")];
    let fitting = units.into_iter().find(|(unit, _)| seconds.abs() >= *unit);
    match fitting {
        Some((unit, name)) => format!("{}\u{a0}{name}", small(seconds / unit)),
        None => "0 s".to_owned(),
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
        Reason::Recovery => "the phase error had to come back",
        Reason::Declaration => "a declaration changed",
        Reason::Group => "its group changed",
        Reason::ChangeOver => "the stream comes from another source",
        Reason::Renewal => "reviewed, and nothing had to change",
    }
}

/// Why an estimate is in its state.
pub(super) fn why_state(reason: StateReason) -> &'static str {
    match reason {
        StateReason::NeverMeasured => "it was never measured",
        StateReason::TooWide => "its interval is wider than 10 ppm either way",
        StateReason::Narrowing => "its interval is still narrowing",
        StateReason::WithinThreshold => "its interval is as narrow as wanted",
        StateReason::LockLost => "its interval has grown too wide for a lock",
        StateReason::ReadingsStopped => "its readings have stopped",
        StateReason::ByDefinition => "it is house time by definition",
    }
}

/// Text as a part of an address: all but letters, digits and `-._~` by their bytes (RFC 3986, 2.1).
pub(super) fn in_address(text: &str) -> String {
    let escaped = |byte: u8| match byte {
        b'a'..=b'z' | b'A'..=b'Z' | b'0'..=b'9' | b'-' | b'.' | b'_' | b'~' => {
            char::from(byte).to_string()
        }
        _ => format!("%{byte:02X}"),
    };
    text.bytes().map(escaped).collect()
}

/// States of a clock, the worst first.
pub(super) const CLOCK_STATES: [State; 4] = [
    State::FreeRunning,
    State::Holdover,
    State::Acquiring,
    State::Locked,
];

/// States of a crossing, the worst first.
pub(super) const CROSSING_STATES: [CrossingState; 4] = [
    CrossingState::OutOfBounds,
    CrossingState::Degraded,
    CrossingState::Waiting,
    CrossingState::Holding,
];

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

/// The mark of a state in a picture: that of its class.
pub(super) fn crossing_standing(state: CrossingState) -> Standing {
    match state {
        CrossingState::Waiting => Standing::Nearing,
        CrossingState::Holding => Standing::Sound,
        CrossingState::Degraded => Standing::Fading,
        CrossingState::OutOfBounds => Standing::Adrift,
    }
}

/// A list of facts: each a name and what is so.
pub(super) fn facts<const N: usize>(id: &str, facts: [(&str, Markup); N]) -> Markup {
    html! {
        dl id=(id) .facts {
            @for (name, fact) in facts { div { dt { (name) } dd { (fact) } } }
        }
    }
}

/// A picture that can be scrolled sideways where it does not fit.
pub(super) fn picture(id: &str, drawn: &Picture) -> Markup {
    let name = format!("Picture: {}", drawn.title());
    html! {
        div id=(id) .scroll role="region" aria-label=(name) tabindex="0" { (PreEscaped(drawn.inline())) }
    }
}

/// With a capital letter.
pub(super) fn sentence(text: &str) -> String {
    let mut chars = text.chars();
    chars.next().map_or_else(String::new, |first| {
        first.to_uppercase().chain(chars).collect()
    })
}

/// How long ago, from house times.
pub(super) fn ago(at_ns: HouseNs, now_ns: HouseNs) -> String {
    format!("{} ago", span((now_ns - at_ns).max(0) as f64 * 1e-9))
}

/// House time as date and time of day on its own scale.
pub(super) fn stamp(house_ns: HouseNs) -> String {
    let seconds = house_ns.div_euclid(1_000_000_000);
    let (days, of_day) = (seconds.div_euclid(86_400), seconds.rem_euclid(86_400));
    let (year, month, day) = civil(days);
    let (h, m, s) = (of_day / 3_600, of_day % 3_600 / 60, of_day % 60);
    format!("{year:04}-{month:02}-{day:02} {h:02}:{m:02}:{s:02}")
}

/// The Gregorian date of a count of days since 1970-01-01.
fn civil(days: i64) -> (i64, i64, i64) {
    let leap = |year: i64| year % 4 == 0 && (year % 100 != 0 || year % 400 == 0);
    let (mut year, mut left) = (1970, days);
    while left >= 365 + i64::from(leap(year)) {
        left -= 365 + i64::from(leap(year));
        year += 1;
    }
    let lengths = [
        31,
        28 + i64::from(leap(year)),
        31,
        30,
        31,
        30,
        31,
        31,
        30,
        31,
        30,
        31,
    ];
    let mut month = 1;
    for length in lengths {
        if left < length {
            break;
        }
        left -= length;
        month += 1;
    }
    (year, month, left + 1)
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
    fn a_bound_is_never_shown_smaller() {
        let shown = [0.001_702_3, 0.001_062_9, 0.5, 12.0, 0.0].map(at_most);
        assert_eq!(shown, ["0.00171", "0.00107", "0.500", "12.0", "0"]);
    }

    #[test]
    fn what_is_rare_is_told_as_one_in_many() {
        assert_eq!(shares(3, 4), "3 and 4 blocks of them");
        assert_eq!(
            shares(1_000_000, 3_000_000),
            "25.00 and 75.00 of every 100 blocks"
        );
        assert_eq!(
            shares(35_000, 1_999_375_000),
            "the first in 1 of 57126 blocks"
        );
        assert_eq!(
            shares(1_999_375_000, 35_000),
            "the second in 1 of 57126 blocks"
        );
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

    /// Dates from the calendar.
    #[test]
    fn house_time_reads_as_a_date() {
        let at = |seconds: i64| stamp(seconds * 1_000_000_000);
        assert_eq!(at(0), "1970-01-01 00:00:00");
        assert_eq!(at(951_782_400 + 86_399), "2000-02-29 23:59:59");
        assert_eq!(at(1_767_225_600 - 1), "2025-12-31 23:59:59");
        assert_eq!(at(1_767_225_600), "2026-01-01 00:00:00");
    }
}
