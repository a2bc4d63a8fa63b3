//! Prometheus' text format, version 0.0.4, family by family.

use std::{
    fmt::{self, Display, Write},
    sync::Arc,
};

/// The text so far.
pub(super) struct Text(pub(super) String);

impl Text {
    /// A gauge, or a count if its name ends so, with a value for each subject that has one.
    /// `labels` writes them with their braces; ids need no escapes.
    pub(super) fn each<S>(
        &mut self,
        (name, help): (&str, &str),
        subjects: &[Arc<S>],
        labels: impl Fn(&S) -> String,
        value: impl Fn(&S) -> Option<f64>,
    ) {
        self.family(name, help);
        for subject in subjects {
            if let Some(value) = value(subject) {
                self.value(name, &labels(subject), value);
            }
        }
    }

    /// A family of one value without labels.
    pub(super) fn one(&mut self, name: &str, help: &str, value: f64) {
        self.family(name, help);
        self.value(name, "", value);
    }

    /// Begins a family.
    pub(super) fn family(&mut self, name: &str, help: &str) {
        let kind = if name.ends_with("_total") {
            "counter"
        } else {
            "gauge"
        };
        // Writing to a string cannot fail.
        let _ = writeln!(self.0, "# HELP {name} {help}\n# TYPE {name} {kind}");
    }

    /// Adds a value to the family that was begun last.
    pub(super) fn value(&mut self, name: &str, labels: &str, value: f64) {
        let _ = writeln!(self.0, "{name}{labels} {}", Number(value));
    }
}

/// A number as Prometheus writes it.
struct Number(f64);

impl Display for Number {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self.0 {
            infinite if infinite.is_infinite() => {
                f.write_str(if infinite > 0.0 { "+Inf" } else { "-Inf" })
            }
            finite => write!(f, "{finite}"),
        }
    }
}
