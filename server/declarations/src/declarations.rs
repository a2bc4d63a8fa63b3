//! `[[clock]]` and `[[crossing]]`.

use std::collections::BTreeSet;

use num_rational::Ratio;
use ratewright_control::{
    ClockDeclaration, CrossingDeclaration, Effects, Engine, Event, Id, Realisation, Refusal,
};
use ratewright_ratio::{Bounds, parse_rate};
use toml::de::DeValue;

use crate::{Section, flag, integer, number, seconds, text};

const MAX_TITLE: usize = 128;
const LARGEST_NUMERATOR: u64 = 1_000_000_000_000;
const LARGEST_DENOMINATOR: u64 = 1_000_000_000;
const LARGEST_BOUND: i64 = 1 << 31;

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
        let mut tolerance_ppm = 0.0;
        section.set(
            "tolerance_ppm",
            "0 to 10000 ppm",
            &mut tolerance_ppm,
            |value| number(value, 0.0, 10_000.0),
        );
        let clock = ClockDeclaration {
            display_name,
            exact,
            tolerance_ppm,
            ..ClockDeclaration::new(id?, nominal_hz?)
        };
        let taken = self.trial.apply(&Event::DeclareClock(clock.clone()), 0);
        noted(section, taken).then_some(clock)
    }

    /// The declaration in a `[[crossing]]`; what has a fault is noted and left out. The clocks of the file
    /// have been read before.
    pub fn crossing(&mut self, section: &Section<'_>) -> Option<CrossingDeclaration> {
        let id = new_id(section, &mut self.crossings);
        let display_name = title(section);
        let source = end("source", section, &self.clocks);
        let sink = end("sink", section, &self.clocks);
        let running = running(section);
        let crossing = CrossingDeclaration {
            display_name,
            headroom_samples: running.headroom_samples,
            realisation: running.realisation,
            group: running.group,
            lead_ns: running.lead_ns,
            review_horizon_ns: running.review_horizon_ns,
            ..CrossingDeclaration::new(id?, source?, sink?, running.bounds?)
        };
        let whole = [&crossing.source, &crossing.sink]
            .iter()
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

/// How a crossing runs: what does not name anything else.
struct Running {
    bounds: Option<Bounds>,
    headroom_samples: f64,
    realisation: Realisation,
    group: Option<Id>,
    lead_ns: i64,
    review_horizon_ns: i64,
}

fn running(section: &Section<'_>) -> Running {
    let (mut max_l, mut max_m) = (1_024, 1_024);
    let mut headroom_samples = 1.0;
    let mut realisation = Realisation::Cadence;
    let mut group = None;
    let (mut lead_ns, mut review_horizon_ns) = (1_000_000_000, 86_400_000_000_000);
    let bound = |value: &_| integer(value, 1, LARGEST_BOUND).map(i64::unsigned_abs);
    section.set("max_l", "1 to 2147483648", &mut max_l, bound);
    section.set("max_m", "1 to 2147483648", &mut max_m, bound);
    section.set(
        "headroom_samples",
        "above 0 to 1000000000 sink samples",
        &mut headroom_samples,
        |value| number(value, f64::MIN_POSITIVE, 1e9),
    );
    section.set(
        "realisation",
        "\"single\" or \"cadence\"",
        &mut realisation,
        read_realisation,
    );
    section.set("group", Id::ACCEPTED, &mut group, |value| {
        as_id(value).map(Some)
    });
    section.set("lead_s", "0.001 to 60 seconds", &mut lead_ns, |value| {
        seconds(value, 0.001, 60.0)
    });
    section.set(
        "review_horizon_s",
        "10 to 2592000 seconds",
        &mut review_horizon_ns,
        |value| seconds(value, 10.0, 2_592_000.0),
    );
    Running {
        bounds: Bounds::new(max_l, max_m).ok(),
        headroom_samples,
        realisation,
        group,
        lead_ns,
        review_horizon_ns,
    }
}

/// True if the engine took a declaration; else its word is noted as a fault of the section.
fn noted(section: &Section<'_>, taken: Result<Effects, Refusal>) -> bool {
    let Err(refusal) = taken else { return true };
    let key = match refusal.field.as_str() {
        "tolerance_ppm" => "tolerance_ppm",
        "nominal_hz" => "rate",
        "headroom_samples" => "headroom_samples",
        "group" => "group",
        "source" => "source",
        "sink" => "sink",
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

fn end(key: &'static str, section: &Section<'_>, clocks: &BTreeSet<Id>) -> Option<Id> {
    const ACCEPTED: &str = "the id of a [[clock]] of this file";
    let id = section.need(key, ACCEPTED, as_id)?;
    if !clocks.contains(&id) {
        section.fault(key, &format!("\"{id}\""), ACCEPTED);
    }
    Some(id)
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

fn read_realisation(value: &DeValue<'_>) -> Option<Realisation> {
    match text(value)? {
        "single" => Some(Realisation::Single),
        "cadence" => Some(Realisation::Cadence),
        _ => None,
    }
}
