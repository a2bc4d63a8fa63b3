//! What became of the readings.

use std::fmt::Write as _;

use ratewright_client::{Clock, Promise, Receipt, RefusedReadings};
use serde_json::{Value, json};

use crate::{json, show};

/// Refusals that are printed one by one for people.
const PRINTED: usize = 20;

/// Counts readings and remembers which line each came from.
#[derive(Debug, Default)]
pub(super) struct Summary {
    lines: Vec<u64>,
    accepted: u64,
    promise: Promise,
    refusals: Vec<(u64, String)>,
}

impl Summary {
    /// The reading of this line was sent.
    pub(super) fn sent(&mut self, line: u64) {
        self.lines.push(line);
    }

    /// This line holds no reading.
    pub(super) fn unreadable(&mut self, line: u64, reason: String) {
        self.refusals.push((line, reason));
    }

    /// These are all the receipts that came.
    pub(super) fn receipts(&mut self, receipts: Vec<Receipt>) {
        for receipt in receipts {
            self.receipt(receipt);
        }
        self.refusals.sort_by_key(|(line, _)| *line);
    }

    fn receipt(&mut self, receipt: Receipt) {
        self.accepted += receipt.accepted;
        self.promise = receipt.promise;
        for refused in receipt.refused {
            let RefusedReadings {
                readings,
                field,
                value,
                accepted,
            } = refused;
            let reason = format!("{field} is {value}; accepted: {accepted}");
            for place in readings {
                let line = usize::try_from(place)
                    .ok()
                    .and_then(|place| self.lines.get(place));
                self.refusals
                    .push((line.copied().unwrap_or(0), reason.clone()));
            }
        }
    }

    /// True if every line was taken in.
    pub(super) fn is_clean(&self) -> bool {
        self.refusals.is_empty() && self.accepted == self.lines.len() as u64
    }

    /// For people.
    pub(super) fn text(&self, clock: &Clock) -> String {
        let mut text = String::new();
        let promise = match self.promise {
            _ if self.accepted == 0 => "",
            Promise::Durable => " (safely on disk)",
            Promise::Applied => " (applied)",
        };
        let (sent, accepted) = (self.lines.len(), self.accepted);
        // Writing to a String cannot fail.
        let _ = writeln!(text, "readings  {sent} sent, {accepted} taken in{promise}");
        for (line, reason) in self.refusals.iter().take(PRINTED) {
            let _ = writeln!(text, "refused   line {line}: {reason}");
        }
        if self.refusals.len() > PRINTED {
            let more = self.refusals.len() - PRINTED;
            let _ = writeln!(text, "          and {more} more; --json lists them all");
        }
        let (drift, state) = show::clock(clock);
        let _ = writeln!(text, "{}: drift {drift}, {state}", clock.declaration.id);
        text
    }

    /// For machines.
    pub(super) fn json(&self, clock: &Clock) -> Value {
        let refusal = |(line, reason): &(u64, String)| json!({ "line": line, "reason": reason });
        json!({
            "sent": self.lines.len(),
            "accepted": self.accepted,
            "receipt": match self.promise {
                Promise::Durable => "durable",
                Promise::Applied => "applied",
            },
            "refusals": self.refusals.iter().map(refusal).collect::<Vec<_>>(),
            "clock": json::clock(clock),
        })
    }
}
