//! The facility as a whole: a few series, however large it is.

use std::sync::Arc;

use super::{MOST_SUBJECTS, text::Text};
use crate::{
    board::{ClockView, CrossingView},
    metrics::{CLOCK_STATES, CROSSING_STATES, clock_state, crossing_state},
};

pub(super) fn write(text: &mut Text, clocks: &[Arc<ClockView>], crossings: &[Arc<CrossingView>]) {
    counts(
        text,
        (
            "ratewright_clocks",
            "Clocks whose estimate is in the state.",
        ),
        CLOCK_STATES.map(|state| {
            let alike = clocks.iter().filter(|v| v.estimate.estimate.state == state);
            (clock_state(state), alike.count())
        }),
    );
    counts(
        text,
        ("ratewright_crossings", "Crossings in the state."),
        CROSSING_STATES.map(|state| {
            let alike = crossings.iter().filter(|v| v.status.state == state);
            (crossing_state(state), alike.count())
        }),
    );
    let slips = crossings.iter().filter_map(|v| v.status.seconds_to_slip);
    text.one(
        "ratewright_slip_soonest_seconds",
        "The least of ratewright_crossing_slip_seconds.",
        slips.fold(f64::INFINITY, f64::min),
    );
    let vouched = crossings.iter().filter_map(|v| v.status.seconds_vouched);
    text.one(
        "ratewright_vouched_soonest_seconds",
        "The least of ratewright_crossing_vouched_seconds.",
        vouched.fold(f64::INFINITY, f64::min),
    );
    let name = "ratewright_left_out";
    text.family(
        name,
        "Without series of their own, the first by name having them.",
    );
    for (kind, all) in [("clock", clocks.len()), ("crossing", crossings.len())] {
        let left_out = all.saturating_sub(MOST_SUBJECTS);
        text.value(name, &format!("{{kind=\"{kind}\"}}"), left_out as f64);
    }
}

fn counts<const N: usize>(
    text: &mut Text,
    (name, help): (&str, &str),
    states: [(&'static str, usize); N],
) {
    text.family(name, help);
    for (state, count) in states {
        text.value(name, &format!("{{state=\"{state}\"}}"), count as f64);
    }
}
