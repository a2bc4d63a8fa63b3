//! What is expected of a clock before it is measured: keys of a `[[clock]]`.

use num_rational::Ratio;
use ratewright_control::{ClockDeclaration, Id};
use ratewright_timing::{LatencyTail, Oscillator};
use toml::de::DeValue;

use crate::{Section, flag, integer, number, text};

/// What these keys say; a key with a fault has its default.
#[derive(Default)]
pub(crate) struct Expected {
    tolerance_ppm: f64,
    oscillator: Option<Oscillator>,
    tail: Option<LatencyTail>,
    quantum_ns: i64,
    statistics: bool,
}

impl Expected {
    pub(crate) fn read(section: &Section<'_>) -> Self {
        let mut it = Self::default();
        section.set(
            "tolerance_ppm",
            "0 to 10000 ppm",
            &mut it.tolerance_ppm,
            |value| number(value, 0.0, 10_000.0),
        );
        section.set(
            "oscillator",
            "\"crystal\", \"compensated\", \"oven\" or \"atomic\"",
            &mut it.oscillator,
            |value| oscillator(value).map(Some),
        );
        section.set(
            "tail",
            "\"reference-late\" or \"counter-late\"",
            &mut it.tail,
            |value| tail(value).map(Some),
        );
        section.set(
            "quantum_ns",
            "0 to 1000000000 ns",
            &mut it.quantum_ns,
            |value| integer(value, 0, 1_000_000_000),
        );
        section.set("statistics", "true or false", &mut it.statistics, flag);
        it
    }

    /// The declaration of a clock of which this is expected.
    pub(crate) fn of(self, id: Id, nominal_hz: Ratio<u64>) -> ClockDeclaration {
        ClockDeclaration {
            tolerance_ppm: self.tolerance_ppm,
            oscillator: self.oscillator,
            tail: self.tail,
            quantum_ns: self.quantum_ns,
            statistics: self.statistics,
            ..ClockDeclaration::new(id, nominal_hz)
        }
    }
}

fn oscillator(value: &DeValue<'_>) -> Option<Oscillator> {
    match text(value)? {
        "crystal" => Some(Oscillator::Crystal),
        "compensated" => Some(Oscillator::Compensated),
        "oven" => Some(Oscillator::Oven),
        "atomic" => Some(Oscillator::Atomic),
        _ => None,
    }
}

fn tail(value: &DeValue<'_>) -> Option<LatencyTail> {
    match text(value)? {
        "reference-late" => Some(LatencyTail::ReferenceLate),
        "counter-late" => Some(LatencyTail::CounterLate),
        _ => None,
    }
}
