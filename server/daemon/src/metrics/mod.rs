//! What Prometheus is told. The names live in this folder and nowhere else.
//!
//! Base units; `_total` counts, `_seconds` are seconds, `_ratio` is dimensionless (1e-6 is one part per
//! million), `_samples` are samples of the crossing's sink. What is counted goes through the `metrics`
//! crate; what the board shows is written at each scrape, so that a deleted clock is gone at once.
//!
//! | metric | labels | meaning |
//! | --- | --- | --- |
//! | `ratewright_build_info` | `version` | always 1 |
//! | `ratewright_house_time_seconds` | | house time: seconds since 1970-01-01 on a TAI-like scale |
//! | `ratewright_clocks` | `state` | clocks whose estimate is in the state |
//! | `ratewright_crossings` | `state` | crossings in the state |
//! | `ratewright_slip_soonest_seconds` | | the least of `ratewright_crossing_slip_seconds`, of all crossings |
//! | `ratewright_vouched_soonest_seconds` | | the least of `ratewright_crossing_vouched_seconds`, of all crossings |
//! | `ratewright_left_out` | `kind` | a `clock` or `crossing` without series of its own: the first 2000 by name have them |
//! | `ratewright_clock_info` | `clock`, `reference`, `probe` | always 1; what its readings are against and who takes them |
//! | `ratewright_clock_drift_ratio` | `clock` | drift against house time; positive runs fast |
//! | `ratewright_clock_drift_deviation_ratio` | `clock` | standard deviation of the drift |
//! | `ratewright_clock_drift_half_width_ratio` | `clock` | half-width of its 95 % interval |
//! | `ratewright_clock_state` | `clock`, `state` | 1 for the state the estimate is in, else 0: `free_running`, `acquiring`, `locked`, `holdover` |
//! | `ratewright_clock_reading_age_seconds` | `clock` | since the newest reading; absent without one |
//! | `ratewright_clock_lock_expected_seconds` | `clock` | until it should lock; absent when locked or not foreseeable |
//! | `ratewright_clock_readings_used_total` | `clock` | readings the estimate rests on |
//! | `ratewright_clock_readings_set_aside_total` | `clock` | readings set aside as outliers |
//! | `ratewright_clock_allan_deviation_ratio` | `clock`, `interval_seconds` | overlapping Allan deviation of the estimated phase, of clocks declared with `statistics`, at 10 s, 80 s, 640 s and so on as far as was seen |
//! | `ratewright_clock_time_deviation_seconds` | `clock`, `interval_seconds` | time deviation, likewise |
//! | `ratewright_clock_mtie_seconds` | `clock`, `interval_seconds` | maximum time interval error, likewise |
//! | `ratewright_crossing_info` | `crossing`, `source`, `sink`, `group` | always 1; its clocks and its group |
//! | `ratewright_crossing_state` | `crossing`, `state` | 1 for the state it is in, else 0: `waiting`, `holding`, `degraded`, `out_of_bounds` |
//! | `ratewright_crossing_target_ratio` | `crossing` | true sink rate over true source rate |
//! | `ratewright_crossing_residual_ratio` | `crossing` | what is set over the target, minus 1 |
//! | `ratewright_crossing_phase_error_samples` | `crossing` | phase error; positive fills a buffer after the resampler |
//! | `ratewright_crossing_phase_deviation_samples` | `crossing` | its standard deviation |
//! | `ratewright_crossing_headroom_samples` | `crossing` | hard limit of the phase error, both ways |
//! | `ratewright_crossing_slip_seconds` | `crossing` | until the 95 % band of the phase error leaves the headroom under the present setting; +Inf if that is not in sight |
//! | `ratewright_crossing_vouched_seconds` | `crossing` | until it can no longer be kept within the headroom, however it is set, if no further reading comes (while it is pinned, as it is set); +Inf if that is not in sight |
//! | `ratewright_crossing_pinned` | `crossing` | 1 while an operator has it pinned, else 0 |
//! | `ratewright_crossing_unapplied_seconds` | `crossing` | since a setting should have taken effect that its follower has not applied; absent if none has reported since the start |
//! | `ratewright_crossing_settings_total` | `crossing` | settings made since the crossing was declared |
//! | `ratewright_readings_total` | `outcome` | readings answered since the start: `accepted`, `refused` |
//! | `ratewright_settings_total` | `reason` | settings published since the start, by why they were made |
//! | `ratewright_setting_evidence_age_seconds` | | histogram, house time: from the newest reading of either clock to the setting that rests on it |
//! | `ratewright_applied_delay_seconds` | | histogram, house time: from the instant of a setting to its effect, as the follower reports |
//! | `ratewright_transitions_total` | `kind`, `to` | changes of state since the start, of a `clock` or a `crossing`; `centred` when an account of phase error began anew |
//! | `ratewright_streams` | `kind` | open streams: `report`, `watch`, `follow` |
//! | `ratewright_superseded_total` | | settings that a slow watcher or follower never got, because a newer one took their place |
//! | `ratewright_connections` | | open gRPC connections |
//! | `ratewright_connections_turned_away_total` | | gRPC connections closed as they came, because there were as many as there may be |
//! | `ratewright_journal_events_total` | | events written to the journal since the start |
//! | `ratewright_journal_rows` | | events that a restart would replay |
//! | `ratewright_store_bytes` | | size of the store on disk |
//! | `ratewright_commit_duration_seconds` | | histogram: one transaction of the store, sync to disk included |
//! | `process_*` | | processor seconds, memory, open files and threads of the daemon, by the usual names |

mod counted;
mod shown;

use ratewright_control::CrossingState;
use ratewright_timing::State;

pub use self::{
    counted::{
        applied, commit, connections, install, open_streams, readings, setting, store, superseded,
        transition, turned_away,
    },
    shown::{MOST_SUBJECTS, Steadiness, render, steadied},
};

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

/// The value of a state's label.
fn clock_state(state: State) -> &'static str {
    match state {
        State::FreeRunning => "free_running",
        State::Acquiring => "acquiring",
        State::Locked => "locked",
        State::Holdover => "holdover",
    }
}

/// The value of a state's label.
fn crossing_state(state: CrossingState) -> &'static str {
    match state {
        CrossingState::Waiting => "waiting",
        CrossingState::Holding => "holding",
        CrossingState::Degraded => "degraded",
        CrossingState::OutOfBounds => "out_of_bounds",
    }
}
