//! What the board shows, written at each scrape in Prometheus' text format (version 0.0.4).

use std::{
    fmt::{Display, Write},
    sync::Arc,
};

use ratewright_control::{CrossingState, HouseNs};
use ratewright_timing::State;

use super::{clock_state, counted, crossing_state};
use crate::board::{Board, ClockView, CrossingView};

const NS_PER_S: f64 = 1e9;
const CLOCK_STATES: [State; 4] = [
    State::FreeRunning,
    State::Acquiring,
    State::Locked,
    State::Holdover,
];
const CROSSING_STATES: [CrossingState; 4] = [
    CrossingState::Waiting,
    CrossingState::Holding,
    CrossingState::Degraded,
    CrossingState::OutOfBounds,
];

/// Everything there is to scrape: what was counted, and what `board` shows at `house_ns`.
pub fn render(board: &Board, house_ns: HouseNs) -> String {
    let mut page = Page(counted::render());
    page.family(
        "ratewright_house_time_seconds",
        "gauge",
        "House time, seconds since 1970-01-01 on a TAI-like scale.",
    );
    page.value(
        "ratewright_house_time_seconds",
        "",
        house_ns as f64 / NS_PER_S,
    );
    clocks(&mut page, &board.clocks(None, usize::MAX), house_ns);
    crossings(&mut page, &board.crossings(None, usize::MAX));
    page.0
}

/// The text so far.
struct Page(String);

impl Page {
    fn family(&mut self, name: &str, kind: &str, help: &str) {
        // Writing to a string cannot fail.
        let _ = writeln!(self.0, "# HELP {name} {help}\n# TYPE {name} {kind}");
    }

    /// `labels` are written already; ids need no escapes.
    fn value(&mut self, name: &str, labels: &str, value: impl Display) {
        let _ = writeln!(self.0, "{name}{labels} {value}");
    }

    /// A gauge, or a count if its name ends so, with a value for each view that has one.
    fn each<V, T: Display>(
        &mut self,
        (name, help): (&str, &str),
        views: &[Arc<V>],
        labels: impl Fn(&V) -> String,
        value: impl Fn(&V) -> Option<T>,
    ) {
        let kind = if name.ends_with("_total") {
            "counter"
        } else {
            "gauge"
        };
        self.family(name, kind, help);
        for view in views {
            if let Some(value) = value(view) {
                self.value(name, &labels(view), value);
            }
        }
    }
}

fn clocks(page: &mut Page, views: &[Arc<ClockView>], house_ns: HouseNs) {
    let labels = |view: &ClockView| format!("{{clock=\"{}\"}}", view.declaration.id);
    let mut each = |name, help, value: &dyn Fn(&ClockView) -> Option<f64>| {
        page.each((name, help), views, labels, value);
    };
    each(
        "ratewright_clock_drift_ratio",
        "Drift against house time; positive runs fast.",
        &|v| Some(v.estimate.estimate.drift),
    );
    each(
        "ratewright_clock_drift_deviation_ratio",
        "Standard deviation of the drift.",
        &|v| Some(v.estimate.estimate.deviation),
    );
    each(
        "ratewright_clock_drift_half_width_ratio",
        "Half-width of the drift's 95 % interval.",
        &|v| Some(v.estimate.estimate.half_width()),
    );
    each(
        "ratewright_clock_reading_age_seconds",
        "Since the newest reading.",
        &|v| {
            let last_ns = v.estimate.estimate.last_reading_ns?;
            Some((house_ns - last_ns) as f64 / NS_PER_S)
        },
    );
    each(
        "ratewright_clock_lock_expected_seconds",
        "Until the estimate should lock.",
        &|v| v.estimate.estimate.lock_expected_in_s,
    );
    each(
        "ratewright_clock_readings_used_total",
        "Readings the estimate rests on.",
        &|v| Some(v.estimate.estimate.rows_used as f64),
    );
    each(
        "ratewright_clock_readings_set_aside_total",
        "Readings set aside as outliers.",
        &|v| Some(v.estimate.estimate.outliers as f64),
    );
    let name = "ratewright_clock_state";
    page.family(name, "gauge", "1 for the state the estimate is in, else 0.");
    for view in views {
        for state in CLOCK_STATES {
            let labels = format!(
                "{{clock=\"{}\",state=\"{}\"}}",
                view.declaration.id,
                clock_state(state)
            );
            page.value(
                name,
                &labels,
                u8::from(view.estimate.estimate.state == state),
            );
        }
    }
}

fn crossings(page: &mut Page, views: &[Arc<CrossingView>]) {
    let labels = |view: &CrossingView| format!("{{crossing=\"{}\"}}", view.declaration.id);
    let mut each = |name, help, value: &dyn Fn(&CrossingView) -> Option<f64>| {
        page.each((name, help), views, labels, |view| value(view).map(Number));
    };
    each(
        "ratewright_crossing_target_ratio",
        "True sink rate over true source rate.",
        &|v| Some(v.status.target),
    );
    each(
        "ratewright_crossing_residual_ratio",
        "What is set over the target, minus 1.",
        &|v| v.status.residual,
    );
    each(
        "ratewright_crossing_phase_error_samples",
        "Phase error; positive fills a buffer after the resampler.",
        &|v| Some(v.status.phase_error_samples),
    );
    each(
        "ratewright_crossing_phase_deviation_samples",
        "Standard deviation of the phase error.",
        &|v| Some(v.status.phase_deviation_samples),
    );
    each(
        "ratewright_crossing_headroom_samples",
        "Hard limit of the phase error, both ways.",
        &|v| Some(v.declaration.headroom_samples),
    );
    each(
        "ratewright_crossing_slip_seconds",
        "Until the 95 % band of the phase error leaves the headroom.",
        &|v| Some(v.status.seconds_to_slip.unwrap_or(f64::INFINITY)),
    );
    each(
        "ratewright_crossing_settings_total",
        "Settings made since the crossing was declared.",
        &|v| Some(v.status.settings_made as f64),
    );
    let name = "ratewright_crossing_state";
    page.family(name, "gauge", "1 for the state the crossing is in, else 0.");
    for view in views {
        for state in CROSSING_STATES {
            let labels = format!(
                "{{crossing=\"{}\",state=\"{}\"}}",
                view.declaration.id,
                crossing_state(state)
            );
            page.value(name, &labels, u8::from(view.status.state == state));
        }
    }
}

/// A number as Prometheus writes it.
struct Number(f64);

impl Display for Number {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        match self.0 {
            infinite if infinite.is_infinite() => {
                f.write_str(if infinite > 0.0 { "+Inf" } else { "-Inf" })
            }
            finite => write!(f, "{finite}"),
        }
    }
}
