//! A crossing each.

use std::sync::Arc;

use ratewright_control::{HouseNs, Id};

use super::{NS_PER_S, text::Text};
use crate::{
    board::{Board, CrossingView},
    metrics::{CROSSING_STATES, crossing_state},
};

pub(super) fn write(
    text: &mut Text,
    board: &Board,
    views: &[Arc<CrossingView>],
    house_ns: HouseNs,
) {
    text.each(
        (
            "ratewright_crossing_info",
            "Always 1; the labels tell its clocks and its group.",
        ),
        views,
        info,
        |_| Some(1.0),
    );
    let labels = |view: &CrossingView| format!("{{crossing=\"{}\"}}", view.declaration.id);
    let mut each = |name, help, value: &dyn Fn(&CrossingView) -> Option<f64>| {
        text.each((name, help), views, labels, value);
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
        "Until the 95 % band of the phase error leaves the headroom under the present setting.",
        &|v| Some(v.status.seconds_to_slip.unwrap_or(f64::INFINITY)),
    );
    each(
        "ratewright_crossing_vouched_seconds",
        "Until it can no longer be kept within the headroom, if no further reading comes.",
        &|v| Some(v.status.seconds_vouched.unwrap_or(f64::INFINITY)),
    );
    each(
        "ratewright_crossing_pinned",
        "1 while an operator has it pinned, else 0.",
        &|v| Some(f64::from(u8::from(v.status.pin.is_some()))),
    );
    each(
        "ratewright_crossing_unapplied_seconds",
        "Since a setting should have taken effect that its follower has not applied.",
        &|v| unapplied_seconds(board, v, house_ns),
    );
    each(
        "ratewright_crossing_settings_total",
        "Settings made since the crossing was declared.",
        &|v| Some(v.status.settings_made as f64),
    );
    let name = "ratewright_crossing_state";
    text.family(name, "1 for the state the crossing is in, else 0.");
    for view in views {
        for state in CROSSING_STATES {
            let labels = format!(
                "{{crossing=\"{}\",state=\"{}\"}}",
                view.declaration.id,
                crossing_state(state)
            );
            text.value(
                name,
                &labels,
                f64::from(u8::from(view.status.state == state)),
            );
        }
    }
}

fn info(view: &CrossingView) -> String {
    let declared = &view.declaration;
    let group = declared.group.as_ref().map_or("", Id::as_str);
    format!(
        "{{crossing=\"{}\",source=\"{}\",sink=\"{}\",group=\"{group}\"}}",
        declared.id, declared.source, declared.sink
    )
}

/// 0 while the follower keeps up; absent if none has reported since the start, or nobody is to follow.
fn unapplied_seconds(board: &Board, view: &CrossingView, house_ns: HouseNs) -> Option<f64> {
    if view.declaration.silent {
        return None;
    }
    let applied = board.applied(&view.declaration.id)?;
    let newest = view.status.setting.as_ref()?;
    if (newest.epoch, newest.number) <= applied {
        return Some(0.0);
    }
    Some((house_ns - newest.effect_ns).max(0) as f64 / NS_PER_S)
}
