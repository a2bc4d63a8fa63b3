//! How a rehearsal went, for machines.

use ratewright_control::CrossingState;
use ratewright_rehearsal::{ClockReport, CrossingReport, Report, Tenure};
use ratewright_timing::State;
use serde_json::{Map, Value, json};

use super::Played;

/// An object with a list of seeds; figures over seeds are left to the reader.
pub(super) fn document(played: &Played) -> Value {
    json!({
        "file": played.file,
        "days": played.script.days,
        "slipped": played.reports.iter().any(|report| report.slips() > 0),
        "seeds": played.reports.iter().map(report).collect::<Vec<_>>(),
    })
}

fn report(report: &Report) -> Value {
    let days = report.length_s / 86_400.0;
    json!({
        "seed": report.seed,
        "readings": report.readings,
        "refused": report.refused,
        "first_refusal": report.first_refusal,
        "crossings": report.crossings.iter().map(|it| crossing(it, days)).collect::<Vec<_>>(),
        "clocks": report.clocks.iter().map(clock).collect::<Vec<_>>(),
    })
}

fn crossing(crossing: &CrossingReport, days: f64) -> Value {
    let word = |state| match state {
        CrossingState::Waiting => "waiting",
        CrossingState::Holding => "holding",
        CrossingState::Degraded => "degraded",
        CrossingState::OutOfBounds => "out_of_bounds",
    };
    json!({
        "crossing": crossing.crossing.as_str(),
        "headroom_samples": crossing.headroom_samples,
        "settings": crossing.settings,
        "changes": crossing.changes,
        "changes_a_day": crossing.changes as f64 / days,
        "worst_phase_error_samples": crossing.worst_samples,
        "worst_believed_phase_error_samples": crossing.worst_believed_samples,
        "slips": crossing.slips,
        "first_slip_seconds": crossing.first_slip_s,
        "seconds_in_state": seconds(&crossing.states, word),
    })
}

fn clock(clock: &ClockReport) -> Value {
    let word = |state| match state {
        State::FreeRunning => "free_running",
        State::Acquiring => "acquiring",
        State::Locked => "locked",
        State::Holdover => "holdover",
    };
    json!({
        "clock": clock.clock.as_str(),
        "share_in_interval": clock.coverage,
        "locked_after_seconds": clock.locked_after_s,
        "seconds_in_state": seconds(&clock.states, word),
    })
}

fn seconds<S: Copy + PartialEq>(tenure: &Tenure<S>, word: impl Fn(S) -> &'static str) -> Value {
    let entries = tenure
        .seconds()
        .map(|(state, seconds)| (word(state).to_owned(), json!(seconds)));
    Value::Object(entries.collect::<Map<_, _>>())
}
