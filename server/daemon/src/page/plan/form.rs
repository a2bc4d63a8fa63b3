//! The planner's form: what is typed, what it asks, and what is wrong with it, field by field.

use maud::{Markup, html};
use ratewright_proto::v1;
use ratewright_ratio::parse_rate;
use serde::Deserialize;

use crate::{
    convert::rate::rate_to_wire,
    refused::{Refused, Violation},
};

/// What was typed; an empty text is nothing.
#[derive(Clone, Debug, Default, Deserialize, PartialEq)]
#[serde(default)]
pub(super) struct Form {
    from: String,
    to: String,
    from_drift: String,
    from_width: String,
    to_drift: String,
    to_width: String,
    max_l: String,
    max_m: String,
    prime: String,
    headroom: String,
    phases: String,
    passband: String,
    attenuation: String,
    frames: String,
}

/// A field of the form.
struct Field {
    name: &'static str,
    label: &'static str,
    hint: &'static str,
    /// Path of what it becomes in the question.
    path: &'static str,
    value: fn(&Form) -> &str,
}

const fn field(
    name: &'static str,
    label: &'static str,
    hint: &'static str,
    path: &'static str,
    value: fn(&Form) -> &str,
) -> Field {
    Field {
        name,
        label,
        hint,
        path,
        value,
    }
}

/// The group of two rows: a rate, its drift, and how well that is known.
const RATES: &str = "Rates";

const GROUPS: [(&str, &[Field]); 3] = [
    (
        RATES,
        &[
            field(
                "from",
                "From, Hz",
                "44100, 44.1k, 30000/1001",
                "source_rate",
                |f| &f.from,
            ),
            field(
                "from_drift",
                "its drift, ppm",
                "positive runs fast",
                "source_drift",
                |f| &f.from_drift,
            ),
            field(
                "from_width",
                "known to \u{b1}, ppm",
                "0 if exactly",
                "source_drift_half_width",
                |f| &f.from_width,
            ),
            field(
                "to",
                "To, Hz",
                "48000, 48k, 48000*1000/1001",
                "sink_rate",
                |f| &f.to,
            ),
            field(
                "to_drift",
                "its drift, ppm",
                "positive runs fast",
                "sink_drift",
                |f| &f.to_drift,
            ),
            field(
                "to_width",
                "known to \u{b1}, ppm",
                "0 if exactly",
                "sink_drift_half_width",
                |f| &f.to_width,
            ),
        ],
    ),
    (
        "Bounds",
        &[
            field("max_l", "Largest L", "1024 if empty", "max_l", |f| &f.max_l),
            field("max_m", "Largest M", "1024 if empty", "max_m", |f| &f.max_m),
            field(
                "prime",
                "Largest prime factor",
                "any if empty",
                "largest_prime",
                |f| &f.prime,
            ),
            field(
                "headroom",
                "Headroom, sink samples",
                "1 if empty",
                "headroom_samples",
                |f| &f.headroom,
            ),
        ],
    ),
    (
        "Filter and more, if wanted",
        &[
            field(
                "passband",
                "Passband up to, Hz",
                "shows the stages",
                "filter.passband_hz",
                |f| &f.passband,
            ),
            field(
                "attenuation",
                "Attenuation, dB",
                "100 if empty",
                "filter.attenuation_db",
                |f| &f.attenuation,
            ),
            field(
                "phases",
                "Phases of one table",
                "to step through",
                "phases",
                |f| &f.phases,
            ),
            field(
                "frames",
                "Video frames a second",
                "25, 30000/1001",
                "frame_rate",
                |f| &f.frames,
            ),
        ],
    ),
];

/// What is wrong, by the fields of the form.
#[derive(Debug, Default)]
pub(super) struct Faults {
    of_fields: Vec<(&'static str, String)>,
    of_all: Option<String>,
}

impl Faults {
    /// Something that is wrong with no field of its own.
    pub(super) fn of_all(why: &str) -> Self {
        Self {
            of_all: Some(why.to_owned()),
            ..Self::default()
        }
    }

    fn note<T>(&mut self, name: &'static str, checked: Result<T, String>) -> Option<T> {
        checked.map_err(|why| self.of_fields.push((name, why))).ok()
    }

    fn of(&self, name: &str) -> Option<&str> {
        let found = self.of_fields.iter().find(|(field, _)| *field == name);
        found.map(|(_, why)| why.as_str())
    }

    fn count(&self) -> usize {
        self.of_fields.len() + usize::from(self.of_all.is_some())
    }
}

impl From<Refused> for Faults {
    fn from(refused: Refused) -> Self {
        let Refused::Invalid(violations) = refused else {
            return Self::of_all(&refused.to_string());
        };
        let mut faults = Self::default();
        for violation in violations {
            match typed_as(&violation) {
                Some(name) => {
                    let Violation {
                        value, accepted, ..
                    } = violation;
                    faults
                        .of_fields
                        .push((name, format!("{value}: accepted is {accepted}")));
                }
                None => faults.of_all = Some(violation.to_string()),
            }
        }
        faults
    }
}

/// The field that a violation is about: the one with the longest path that the violation's begins with.
fn typed_as(violation: &Violation) -> Option<&'static str> {
    let fields = GROUPS.iter().flat_map(|(_, fields)| fields.iter());
    let fitting = fields.filter(|field| violation.field.starts_with(field.path));
    let closest = fitting
        .max_by_key(|field| field.path.len())
        .map(|field| field.name);
    closest.or_else(|| violation.field.starts_with("filter").then_some("passband"))
}

impl Form {
    pub(super) fn is_empty(&self) -> bool {
        *self == Self::default()
    }

    /// A desk of 44.1 kHz that is 12.5 ppm fast, into a house of 48 kHz.
    pub(super) fn example() -> Self {
        let text = |text: &str| text.to_owned();
        Self {
            from: text("44.1k"),
            to: text("48k"),
            from_drift: text("12.5"),
            from_width: text("0.3"),
            headroom: text("4"),
            passband: text("20000"),
            ..Self::default()
        }
    }

    /// The question.
    pub(super) fn request(&self) -> Result<v1::PlanRatioRequest, Faults> {
        let mut faults = Faults::default();
        let source_rate = faults.note("from", rate(&self.from));
        let sink_rate = faults.note("to", rate(&self.to));
        let [source_drift, source_width, sink_drift, sink_width] = [
            faults.note("from_drift", drift(&self.from_drift, -10_000.0)),
            faults.note("from_width", drift(&self.from_width, 0.0)),
            faults.note("to_drift", drift(&self.to_drift, -10_000.0)),
            faults.note("to_width", drift(&self.to_width, 0.0)),
        ];
        let request = v1::PlanRatioRequest {
            source_rate,
            sink_rate,
            source_drift: source_drift.unwrap_or(0.0),
            source_drift_half_width: source_width.unwrap_or(0.0),
            sink_drift: sink_drift.unwrap_or(0.0),
            sink_drift_half_width: sink_width.unwrap_or(0.0),
            max_l: faults.note("max_l", count(&self.max_l)).unwrap_or(0),
            max_m: faults.note("max_m", count(&self.max_m)).unwrap_or(0),
            largest_prime: faults.note("prime", count(&self.prime)).unwrap_or(0),
            headroom_samples: faults
                .note("headroom", number(&self.headroom, 0.0))
                .unwrap_or(0.0),
            phases: faults.note("phases", count(&self.phases)).unwrap_or(0),
            filter: self.filter(&mut faults),
            frame_rate: match self.frames.as_str() {
                "" => None,
                text => faults.note("frames", rate(text)),
            },
            ..v1::PlanRatioRequest::default()
        };
        if faults.count() > 0 {
            Err(faults)
        } else {
            Ok(request)
        }
    }

    fn filter(&self, faults: &mut Faults) -> Option<v1::FilterWish> {
        let attenuation = faults.note("attenuation", number(&self.attenuation, 100.0))?;
        if self.passband.is_empty() {
            return None;
        }
        Some(v1::FilterWish {
            passband_hz: faults.note("passband", number(&self.passband, 0.0))?,
            attenuation_db: attenuation,
        })
    }

    /// The form, with what was typed and what is wrong with it.
    pub(super) fn fields(&self, faults: &Faults) -> Markup {
        html! {
            @if faults.count() > 0 {
                p #faults .verdict.adrift role="alert" {
                    span .state { "This cannot be planned" } ": "
                    @if let Some(why) = &faults.of_all { (why) }
                    @else { (faults.count()) " of the fields below " @if faults.count() == 1 { "is" } @else { "are" } " not as accepted." }
                }
            }
            form #planner .planner action="/plan" method="get" aria-label="What is to be planned" {
                @for (name, fields) in &GROUPS {
                    fieldset .threes[*name == RATES] {
                        legend { (name) }
                        @for field in *fields { (self.field(field, faults)) }
                    }
                }
                button type="submit" { "Plan" }
            }
        }
    }

    fn field(&self, field: &Field, faults: &Faults) -> Markup {
        let Field {
            name,
            label,
            hint,
            value,
            ..
        } = field;
        let fault = faults.of(name);
        let (hint_id, fault_id) = (format!("{name}-hint"), format!("{name}-fault"));
        let described = match fault {
            Some(_) => format!("{hint_id} {fault_id}"),
            None => hint_id.clone(),
        };
        html! {
            div .field {
                label for=(name) { (label) }
                input id=(name) name=(name) value=(value(self)) autocomplete="off" inputmode="text" maxlength="64"
                    aria-describedby=(described) aria-invalid=[fault.map(|_| "true")];
                span .aside id=(hint_id) { (hint) }
                @if let Some(fault) = fault { span .fault id=(fault_id) { (label) " is " (fault) } }
            }
        }
    }
}

fn rate(text: &str) -> Result<v1::Rate, String> {
    if text.trim().is_empty() {
        return Err(
            "empty: accepted is a rate in Hz, such as 44100, 44.1k or 30000/1001".to_owned(),
        );
    }
    let accepted = |why| format!("{text}: {why}");
    parse_rate(text.trim())
        .map(|rate| rate_to_wire(&rate))
        .map_err(accepted)
}

/// A drift in ppm, which goes on dimensionless; nothing is 0.
fn drift(text: &str, least: f64) -> Result<f64, String> {
    match number(text, 0.0)? {
        ppm if (least..=10_000.0).contains(&ppm) => Ok(ppm * 1e-6),
        ppm => Err(format!("{ppm}: accepted is {least} to 10000 ppm")),
    }
}

fn number(text: &str, if_empty: f64) -> Result<f64, String> {
    if text.trim().is_empty() {
        return Ok(if_empty);
    }
    // People type the sign that is made for it.
    match text.trim().replace('\u{2212}', "-").parse::<f64>() {
        Ok(value) if value.is_finite() => Ok(value),
        _ => Err(format!("{text}: accepted is a number, such as 12.5")),
    }
}

fn count(text: &str) -> Result<u64, String> {
    match text.trim() {
        "" => Ok(0),
        digits => match digits.parse::<u64>() {
            Ok(count) if count > 0 => Ok(count),
            _ => Err(format!(
                "{text}: accepted is a whole number from 1 on, or nothing"
            )),
        },
    }
}
