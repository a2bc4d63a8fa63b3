//! What is counted as it happens.

use std::{
    sync::{
        OnceLock,
        atomic::{AtomicU64, Ordering},
    },
    time::Duration,
};

use ::metrics::{
    Unit, counter, describe_counter, describe_gauge, describe_histogram, gauge, histogram,
};
use metrics_exporter_prometheus::{Matcher, PrometheusBuilder, PrometheusHandle};
use ratewright_control::{Reason, Setting, Transition};

use super::{clock_state, crossing_state};

const READINGS: &str = "ratewright_readings_total";
const SETTINGS: &str = "ratewright_settings_total";
const TRANSITIONS: &str = "ratewright_transitions_total";
const STREAMS: &str = "ratewright_streams";
const EVENTS: &str = "ratewright_journal_events_total";
const COMMIT: &str = "ratewright_commit_duration_seconds";
const BUILD: &str = "ratewright_build_info";

/// A commit takes from well under a millisecond on a disk with a safe cache to long on a sick one.
const COMMIT_BUCKETS_S: [f64; 9] = [0.0005, 0.001, 0.0025, 0.005, 0.01, 0.025, 0.1, 0.5, 2.5];

/// Commits between two compactions of the histogram's samples: nobody may be scraping.
const COMMITS_AN_UPKEEP: u64 = 1024;

static RECORDER: OnceLock<Option<PrometheusHandle>> = OnceLock::new();

/// Starts counting. Call once a process, before anything is recorded; later calls do nothing.
pub fn install() {
    RECORDER.get_or_init(|| {
        let builder = PrometheusBuilder::new()
            .set_buckets_for_metric(Matcher::Full(COMMIT.to_owned()), &COMMIT_BUCKETS_S);
        match builder.and_then(PrometheusBuilder::install_recorder) {
            Ok(handle) => Some(handle),
            Err(fault) => {
                tracing::error!(%fault, "nothing is counted for Prometheus");
                None
            }
        }
    });
    describe();
    gauge!(BUILD, "version" => env!("CARGO_PKG_VERSION")).set(1.0);
}

fn describe() {
    describe_gauge!(BUILD, "Always 1; the label tells the version.");
    describe_counter!(READINGS, "Readings answered since the start, by outcome.");
    describe_counter!(
        SETTINGS,
        "Settings published since the start, by why they were made."
    );
    describe_counter!(TRANSITIONS, "Changes of state since the start.");
    describe_gauge!(STREAMS, "Open report, watch and follow streams.");
    describe_counter!(EVENTS, "Events written to the journal since the start.");
    describe_histogram!(
        COMMIT,
        Unit::Seconds,
        "One transaction of the store, sync to disk included."
    );
}

/// Everything counted so far, in Prometheus' text format.
pub(super) fn render() -> String {
    RECORDER
        .get()
        .and_then(Option::as_ref)
        .map(PrometheusHandle::render)
        .unwrap_or_default()
}

/// A batch of readings was answered.
pub fn readings(accepted: usize, refused: usize) {
    counter!(READINGS, "outcome" => "accepted").increment(accepted as u64);
    counter!(READINGS, "outcome" => "refused").increment(refused as u64);
}

/// A group of commands was written: events in it, and how long the transaction took.
pub fn commit(events: usize, took: Duration) {
    static COMMITS: AtomicU64 = AtomicU64::new(0);
    counter!(EVENTS).increment(events as u64);
    histogram!(COMMIT).record(took);
    let before = COMMITS.fetch_add(1, Ordering::Relaxed);
    if before % COMMITS_AN_UPKEEP == COMMITS_AN_UPKEEP - 1
        && let Some(Some(handle)) = RECORDER.get()
    {
        handle.run_upkeep();
    }
}

/// A setting was published.
pub fn setting(setting: &Setting) {
    let reason = match setting.reason {
        Reason::First => "first",
        Reason::Evidence => "evidence",
        Reason::Recovery => "recovery",
        Reason::Declaration => "declaration",
        Reason::Group => "group",
        Reason::Renewal => "renewal",
    };
    counter!(SETTINGS, "reason" => reason).increment(1);
}

/// A clock or a crossing changed its state.
pub fn transition(transition: &Transition) {
    let (kind, to) = match transition {
        Transition::Clock { to, .. } => ("clock", clock_state(*to)),
        Transition::Crossing { to, .. } => ("crossing", crossing_state(*to)),
        Transition::Centred { .. } => ("crossing", "centred"),
    };
    counter!(TRANSITIONS, "kind" => kind, "to" => to).increment(1);
}

/// Streams open now.
pub fn open_streams(open: usize) {
    gauge!(STREAMS).set(open as f64);
}
