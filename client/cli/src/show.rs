//! Numbers as people read them.

use num_rational::Ratio;
use ratewright_client::{
    Clock, Crossing, CrossingState, Estimate, EstimateState, LatencyTail, Oscillator, Realisation,
    Realised, Reason,
};
use ratewright_ratio::Cadence;

/// A dimensionless offset with its sign: `+12.3 ppb`, `-1.25 ppm`, `+0.14 %`.
pub(crate) fn offset(fraction: f64) -> String {
    let size = fraction.abs();
    if size != 0.0 && size < 1e-12 {
        return "below 0.001 ppb".to_owned();
    }
    let (scale, unit) = match size {
        _ if size < 1e-6 => (1e9, "ppb"),
        _ if size < 1e-3 => (1e6, "ppm"),
        _ => (1e2, "%"),
    };
    format!("{:+} {unit}", Significant(fraction * scale))
}

/// A drift in ppm with its half-width: `+12.345 ± 0.021 ppm`.
fn drift(drift: f64, half_width: f64) -> String {
    format!("{:+.3} ± {:.3} ppm", drift * 1e6, half_width * 1e6)
}

/// A length of time: `256 µs`, `340 ms`, `12.5 s`, `28 min`, `3.2 h`, `4.1 days`, `12 years`.
pub(crate) fn duration(seconds: f64) -> String {
    const STEPS: [(f64, f64, &str); 8] = [
        (1e-6, 1e-9, "ns"),
        (1e-3, 1e-6, "µs"),
        (1.0, 1e-3, "ms"),
        (120.0, 1.0, "s"),
        (7_200.0, 60.0, "min"),
        (172_800.0, 3_600.0, "h"),
        (63_072_000.0, 86_400.0, "days"),
        (f64::INFINITY, 31_536_000.0, "years"),
    ];
    if seconds == 0.0 {
        return "0 s".to_owned();
    }
    for (below, unit, name) in STEPS {
        if seconds.abs() < below {
            return format!("{} {name}", Significant(seconds / unit));
        }
    }
    "for ever".to_owned()
}

/// A time that is left, in s, to the second: `8 min 37 s`; none is not within a day.
pub(crate) fn left(seconds: Option<f64>) -> String {
    let Some(seconds) = seconds else {
        return "not within a day".to_owned();
    };
    match seconds.max(0.0).round() as u64 {
        s @ 0..60 => format!("{s} s"),
        s @ 60..3_600 => format!("{} min {:02} s", s / 60, s % 60),
        s => format!("{} h {:02} min", s / 3_600, s % 3_600 / 60),
    }
}

/// The phase error of a crossing in its headroom: `+12.3 of ±48`.
pub(crate) fn phase(crossing: &Crossing) -> String {
    format!(
        "{:+.1} of ±{}",
        crossing.status.phase_error_samples, crossing.declaration.headroom_samples
    )
}

/// A rate: `44.1 kHz`, `60 Hz`, `48000000/1001 Hz`.
pub(crate) fn rate(hz: Ratio<u64>) -> String {
    if !hz.is_integer() {
        return format!("{hz} Hz");
    }
    let hz = hz.to_integer();
    match hz {
        1_000_000.. if hz.is_multiple_of(1_000) => format!("{} MHz", hz as f64 / 1e6),
        1_000.. => format!("{} kHz", hz as f64 / 1e3),
        _ => format!("{hz} Hz"),
    }
}

/// What a resampler is to run: `160/147`, or `2 x 12/11 + 5 x 13/12`.
pub(crate) fn realised(realised: &Realised) -> String {
    match realised {
        Realised::Single(ratio) => format!("{}/{}", ratio.numer(), ratio.denom()),
        Realised::Cadence(cadence) => pair(cadence),
        Realised::Stepping(stepping) => {
            let (advance, longer) = stepping.advances();
            format!("{} phases by {advance} or {longer}", stepping.phases())
        }
        Realised::Lazy {
            cadence,
            swing_samples,
        } => format!("{}, held within ±{swing_samples}", pair(cadence)),
    }
}

fn pair(cadence: &Cadence) -> String {
    format!(
        "{} x {}/{} + {} x {}/{}",
        cadence.low_blocks(),
        cadence.low().numer(),
        cadence.low().denom(),
        cadence.high_blocks(),
        cadence.high().numer(),
        cadence.high().denom(),
    )
}

/// What is known of a clock: its drift, and how good that is.
pub(crate) fn clock(clock: &Clock) -> (String, String) {
    let estimate = &clock.estimate;
    if clock.declaration.exact {
        ("0 by definition".to_owned(), "exact".to_owned())
    } else if estimate.readings_used == 0 {
        (
            "not measured".to_owned(),
            state_word(estimate.state).to_owned(),
        )
    } else {
        (
            drift(estimate.drift, estimate.half_width()),
            estimate_state(estimate),
        )
    }
}

/// How good an estimate is: `locked`, `acquiring, locks in about 2 min`.
fn estimate_state(estimate: &Estimate) -> String {
    let state = state_word(estimate.state);
    match estimate.lock_expected_seconds {
        Some(seconds) => format!("{state}, locks in about {}", duration(seconds)),
        None => state.to_owned(),
    }
}

/// The word for a state of an estimate.
pub(crate) fn state_word(state: EstimateState) -> &'static str {
    match state {
        EstimateState::FreeRunning => "free-running",
        EstimateState::Acquiring => "acquiring",
        EstimateState::Locked => "locked",
        EstimateState::Holdover => "holdover",
    }
}

/// The word for how a crossing fares.
pub(crate) fn crossing_word(state: CrossingState) -> &'static str {
    match state {
        CrossingState::Waiting => "waiting",
        CrossingState::Holding => "holding",
        CrossingState::Degraded => "degraded",
        CrossingState::OutOfBounds => "out of bounds",
    }
}

/// How a crossing fares, with what else an operator has to know: `holding, pinned by Ada`.
pub(crate) fn crossing_state(crossing: &Crossing) -> String {
    let (declaration, status) = (&crossing.declaration, &crossing.status);
    let mut text = crossing_word(status.state).to_owned();
    if let Some(needed) = &status.needed {
        text += &format!(", needs {}/{}", needed.max_l(), needed.max_m());
    }
    if let Some(pin) = &status.pin {
        text += &format!(", pinned by {}", pin.by);
    }
    if status.source != declaration.source {
        text += &format!(", on backup {}", status.source);
    }
    if declaration.silent {
        text += ", silent";
    }
    text
}

/// The word for what a resampler can do.
pub(crate) fn realisation_word(realisation: Realisation) -> &'static str {
    match realisation {
        Realisation::Single => "single",
        Realisation::Cadence => "cadence",
        Realisation::Stepping => "stepping",
        Realisation::Lazy => "lazy",
    }
}

/// The word for a kind of oscillator.
pub(crate) fn oscillator_word(oscillator: Oscillator) -> &'static str {
    match oscillator {
        Oscillator::Crystal => "crystal",
        Oscillator::Compensated => "compensated",
        Oscillator::Oven => "oven",
        Oscillator::Atomic => "atomic",
    }
}

/// The word for the side of a reading that comes late.
pub(crate) fn tail_word(tail: LatencyTail) -> &'static str {
    match tail {
        LatencyTail::ReferenceLate => "reference-late",
        LatencyTail::CounterLate => "counter-late",
    }
}

/// The word for why a setting was decided.
pub(crate) fn reason_word(reason: Reason) -> &'static str {
    match reason {
        Reason::First => "first",
        Reason::Evidence => "evidence",
        Reason::Recovery => "recovery",
        Reason::Declaration => "declaration",
        Reason::Group => "group",
        Reason::Renewal => "renewal",
        Reason::ChangeOver => "changeover",
    }
}

/// A number with three significant digits, and at most three places.
struct Significant(f64);

impl std::fmt::Display for Significant {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        let size = self.0.abs();
        let places = match size {
            _ if size == 0.0 || size >= 100.0 => 0,
            _ if size >= 10.0 => 1,
            _ if size >= 1.0 => 2,
            _ => 3,
        };
        if f.sign_plus() && self.0 >= 0.0 {
            f.write_str("+")?;
        }
        write!(f, "{:.places$}", self.0)
    }
}

/// Rows in columns, the first row a heading; numbers and words alike to the left.
pub(crate) fn table(rows: &[Vec<String>]) -> String {
    let columns = rows.iter().map(Vec::len).max().unwrap_or(0);
    let width = |column: usize| {
        rows.iter()
            .filter_map(|row| row.get(column))
            .map(|cell| cell.chars().count())
            .max()
    };
    let widths: Vec<usize> = (0..columns)
        .map(|column| width(column).unwrap_or(0))
        .collect();
    let mut text = String::new();
    for row in rows {
        let mut line = String::from("  ");
        for (cell, width) in row.iter().zip(&widths) {
            let gap = width + 3 - cell.chars().count();
            line.push_str(cell);
            line.extend(std::iter::repeat_n(' ', gap));
        }
        text.push_str(line.trim_end());
        text.push('\n');
    }
    text
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn units_suit_the_size() {
        assert_eq!(offset(1.23e-8), "+12.3 ppb");
        assert_eq!(offset(-1.25e-6), "-1.25 ppm");
        assert_eq!(offset(-0.0014), "-0.140 %");
        assert_eq!(offset(0.0), "+0 ppb");
        assert_eq!(offset(-6.7e-17), "below 0.001 ppb");
        assert_eq!(duration(0.000_256), "256 µs");
        assert_eq!(duration(0.34), "340 ms");
        assert_eq!(duration(90.0), "90.0 s");
        assert_eq!(duration(11_520.0), "3.20 h");
        assert_eq!(duration(4e9), "127 years");
        assert_eq!(rate(Ratio::from_integer(44_100)), "44.1 kHz");
        assert_eq!(rate(Ratio::new(30_000, 1_001)), "30000/1001 Hz");
        assert_eq!(rate(Ratio::from_integer(1_000_000_000)), "1000 MHz");
    }
}
