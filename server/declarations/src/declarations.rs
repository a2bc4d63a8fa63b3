//! `[[clock]]` and `[[crossing]]`.

use std::collections::BTreeSet;

use num_rational::Ratio;
use ratewright_control::{
    ClockDeclaration, CrossingDeclaration, Effects, Engine, Event, Id, Refusal,
};
use ratewright_ratio::parse_rate;
use toml::de::DeValue;

use crate::expected::Expected;
use crate::running::Running;
use crate::{Section, flag, integer, text};

const MAX_TITLE: usize = 128;
const LARGEST_NUMERATOR: u64 = 1_000_000_000_000;
const LARGEST_DENOMINATOR: u64 = 1_000_000_000;

/// Reads declarations one after the other, and knows what was declared before.
#[derive(Debug)]
pub struct Declarations {
    /// The engine has the last word on what fits together; it is asked here, where the line is known.
    trial: Engine,
    clocks: BTreeSet<Id>,
    crossings: BTreeSet<Id>,
}

impl Default for Declarations {
    fn default() -> Self {
        Self {
            trial: Engine::new(1),
            clocks: BTreeSet::new(),
            crossings: BTreeSet::new(),
        }
    }
}

impl Declarations {
    /// The declaration in a `[[clock]]`; what has a fault is noted and left out.
    pub fn clock(&mut self, section: &Section<'_>) -> Option<ClockDeclaration> {
        let nominal_hz = section.need("rate", RATE, rate);
        let mut exact = false;
        section.set("exact", "true or false", &mut exact, flag);
        self.clock_of_rate(section, nominal_hz, exact)
    }

    /// As [`Declarations::clock`], of a table that needs no rate because its clock counts nanoseconds.
    pub fn host(&mut self, section: &Section<'_>) -> Option<ClockDeclaration> {
        self.clock_of_rate(section, Some(Ratio::from_integer(1_000_000_000)), false)
    }

    fn clock_of_rate(
        &mut self,
        section: &Section<'_>,
        nominal_hz: Option<Ratio<u64>>,
        exact: bool,
    ) -> Option<ClockDeclaration> {
        let id = new_id(section, &mut self.clocks);
        let display_name = title(section);
        let expected = Expected::read(section);
        let clock = ClockDeclaration {
            display_name,
            exact,
            ..expected.of(id?, nominal_hz?)
        };
        let taken = self.trial.apply(&Event::DeclareClock(clock.clone()), 0);
        noted(section, taken).then_some(clock)
    }

    /// The declaration in a `[[crossing]]`; what has a fault is noted and left out. The clocks of the file
    /// have been read before.
    pub fn crossing(&mut self, section: &Section<'_>) -> Option<CrossingDeclaration> {
        let id = new_id(section, &mut self.crossings);
        let display_name = title(section);
        let clock = |value: &_| as_id(value).filter(|id| self.clocks.contains(id));
        let source = section.need("source", CLOCK, clock);
        let sink = section.need("sink", CLOCK, clock);
        let mut backup = None;
        section.set("backup", CLOCK, &mut backup, |value| clock(value).map(Some));
        let running = Running::read(section);
        let crossing = CrossingDeclaration {
            display_name,
            backup,
            ..running.between(id?, source?, sink?)
        };
        let whole = [&crossing.source, &crossing.sink]
            .into_iter()
            .chain(&crossing.backup)
            .all(|end| self.trial.clock(end).is_some());
        if !whole {
            // A clock of it has a fault of its own, which is noted already.
            return None;
        }
        let taken = self
            .trial
            .apply(&Event::DeclareCrossing(crossing.clone()), 0);
        noted(section, taken).then_some(crossing)
    }
}

/// True if the engine took a declaration; else its word is noted as a fault of the section.
fn noted(section: &Section<'_>, taken: Result<Effects, Refusal>) -> bool {
    let Err(refusal) = taken else { return true };
    let key = match refusal.field.as_str() {
        "nominal_hz" => "rate",
        "tolerance_ppm" => "tolerance_ppm",
        "oscillator" => "oscillator",
        "latency_tail" => "tail",
        "quantum_ns" | "quantum_s" => "quantum_ns",
        "statistics" => "statistics",
        "source" => "source",
        "sink" => "sink",
        "backup" => "backup",
        "headroom_samples" => "headroom_samples",
        "realisation" => "realisation",
        "group" => "group",
        "lead_ns" => "lead_s",
        "review_horizon_ns" => "review_horizon_s",
        "least_hold_ns" => "least_hold_s",
        "pitch_limit_ppm" => "pitch_limit_ppm",
        "silent" => "silent",
        _ => "id",
    };
    section.fault(key, &refusal.value, &refusal.accepted);
    false
}

/// The key `id`, which must be there and not be taken; it is from then on.
fn new_id(section: &Section<'_>, taken: &mut BTreeSet<Id>) -> Option<Id> {
    let id = section.need("id", Id::ACCEPTED, as_id)?;
    if taken.insert(id.clone()) {
        return Some(id);
    }
    section.fault(
        "id",
        &format!("\"{id}\" a second time"),
        "a name of its own",
    );
    None
}

/// The key `title`; empty if it is not there.
fn title(section: &Section<'_>) -> String {
    let mut title = String::new();
    section.set(
        "title",
        "a text of at most 128 bytes",
        &mut title,
        |value| {
            text(value)
                .filter(|title| title.len() <= MAX_TITLE)
                .map(str::to_owned)
        },
    );
    title
}

/// A string that is an id.
pub fn as_id(value: &DeValue<'_>) -> Option<Id> {
    Id::new(text(value)?).ok()
}

const CLOCK: &str = "the id of a [[clock]] of this file";

const RATE: &str = "a rate in Hz above 0, such as 48000, \"44.1k\" or \"30000/1001\", whose parts are \
                    at most 10^12 / 10^9";

fn rate(value: &DeValue<'_>) -> Option<Ratio<u64>> {
    let rate = match value {
        DeValue::Integer(_) => Ratio::from_integer(integer(value, 1, i64::MAX)?.unsigned_abs()),
        _ => parse_rate(text(value)?).ok()?,
    };
    let in_range =
        (1..=LARGEST_NUMERATOR).contains(rate.numer()) && *rate.denom() <= LARGEST_DENOMINATOR;
    in_range.then_some(rate)
}
