//! A clock each.

use std::sync::Arc;

use ratewright_control::{HouseNs, Reference};

use super::{NS_PER_S, text::Text};
use crate::{
    board::ClockView,
    metrics::{CLOCK_STATES, clock_state},
};

pub(super) fn write(text: &mut Text, views: &[Arc<ClockView>], house_ns: HouseNs) {
    text.each(
        (
            "ratewright_clock_info",
            "Always 1; the labels tell what its readings are against and who takes them.",
        ),
        views,
        info,
        |_| Some(1.0),
    );
    let labels = |view: &ClockView| format!("{{clock=\"{}\"}}", view.declaration.id);
    let mut each = |name, help, value: &dyn Fn(&ClockView) -> Option<f64>| {
        text.each((name, help), views, labels, value);
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
    text.family(name, "1 for the state the estimate is in, else 0.");
    for view in views {
        for state in CLOCK_STATES {
            let labels = format!(
                "{{clock=\"{}\",state=\"{}\"}}",
                view.declaration.id,
                clock_state(state)
            );
            let is_in = view.estimate.estimate.state == state;
            text.value(name, &labels, f64::from(u8::from(is_in)));
        }
    }
}

/// A probe's label is an id or empty on the wire, so it needs no escapes either.
fn info(view: &ClockView) -> String {
    let reference = match &view.estimate.reference {
        None => "",
        Some(Reference::House) => "house",
        Some(Reference::Clock(id)) => id.as_str(),
    };
    let probe = view.estimate.probe.as_deref().unwrap_or_default();
    let id = &view.declaration.id;
    format!("{{clock=\"{id}\",reference=\"{reference}\",probe=\"{probe}\"}}")
}
