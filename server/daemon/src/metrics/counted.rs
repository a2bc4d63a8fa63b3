//! What is counted as it happens.

use std::{
    sync::{
        LazyLock, OnceLock,
        atomic::{AtomicU64, Ordering},
    },
    time::Duration,
};

use ::metrics::{
    Unit, counter, describe_counter, describe_gauge, describe_histogram, gauge, histogram,
};
use metrics_exporter_prometheus::{Matcher, PrometheusBuilder, PrometheusHandle};
use ratewright_control::{HouseNs, Reason, Setting, Transition};

use super::{CLOCK_STATES, CROSSING_STATES, clock_state, crossing_state};

const READINGS: &str = "ratewright_readings_total";
const SETTINGS: &str = "ratewright_settings_total";
const TRANSITIONS: &str = "ratewright_transitions_total";
const EVIDENCE_AGE: &str = "ratewright_setting_evidence_age_seconds";
const APPLIED_DELAY: &str = "ratewright_applied_delay_seconds";
const STREAMS: &str = "ratewright_streams";
const SUPERSEDED: &str = "ratewright_superseded_total";
const CONNECTIONS: &str = "ratewright_connections";
const TURNED_AWAY: &str = "ratewright_connections_turned_away_total";
const JOURNAL_ROWS: &str = "ratewright_journal_rows";
const STORE_BYTES: &str = "ratewright_store_bytes";
const EVENTS: &str = "ratewright_journal_events_total";
const COMMIT: &str = "ratewright_commit_duration_seconds";
const BUILD: &str = "ratewright_build_info";

/// A commit takes from well under a millisecond on a disk with a safe cache to long on a sick one.
const COMMIT_BUCKETS_S: [f64; 9] = [0.0005, 0.001, 0.0025, 0.005, 0.01, 0.025, 0.1, 0.5, 2.5];

/// Decisions come each second until clocks are locked, then each ten seconds; a follower is late by a
/// block, or by the network's worst.
const HOUSE_BUCKETS_S: [f64; 9] = [0.01, 0.05, 0.25, 1.0, 2.5, 5.0, 10.0, 30.0, 120.0];

/// Commits between two compactions of the histogram's samples: nobody may be scraping.
const COMMITS_AN_UPKEEP: u64 = 1024;

const REASONS: [Reason; 7] = [
    Reason::First,
    Reason::Evidence,
    Reason::Recovery,
    Reason::Declaration,
    Reason::Group,
    Reason::Renewal,
    Reason::ChangeOver,
];

static RECORDER: OnceLock<Option<PrometheusHandle>> = OnceLock::new();
static PROCESS: LazyLock<metrics_process::Collector> = LazyLock::new(Default::default);

/// Starts counting. Call once a process, before anything is recorded; later calls do nothing.
pub fn install() {
    RECORDER.get_or_init(|| {
        let builder = PrometheusBuilder::new()
            .set_buckets_for_metric(Matcher::Full(COMMIT.to_owned()), &COMMIT_BUCKETS_S)
            .and_then(|it| {
                it.set_buckets_for_metric(Matcher::Full(EVIDENCE_AGE.to_owned()), &HOUSE_BUCKETS_S)
            })
            .and_then(|it| {
                it.set_buckets_for_metric(Matcher::Full(APPLIED_DELAY.to_owned()), &HOUSE_BUCKETS_S)
            });
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
    // What may never happen is there all the same: the absence of a series says nothing, and the first
    // event of one that was absent is no increase.
    gauge!(CONNECTIONS).increment(0.0);
    counter!(SUPERSEDED).increment(0);
    counter!(TURNED_AWAY).increment(0);
    for reason in REASONS {
        counter!(SETTINGS, "reason" => reason_label(reason)).increment(0);
    }
    let of_clocks = CLOCK_STATES
        .map(clock_state)
        .into_iter()
        .chain(["faulty", "sound"]);
    let of_crossings = CROSSING_STATES
        .map(crossing_state)
        .into_iter()
        .chain(["centred"]);
    let kinds = of_clocks
        .map(|to| ("clock", to))
        .chain(of_crossings.map(|to| ("crossing", to)));
    for (kind, to) in kinds {
        counter!(TRANSITIONS, "kind" => kind, "to" => to).increment(0);
    }
    readings(0, 0);
}

fn describe() {
    PROCESS.describe();
    describe_gauge!(BUILD, "Always 1; the label tells the version.");
    describe_counter!(READINGS, "Readings answered since the start, by outcome.");
    describe_counter!(
        SETTINGS,
        "Settings published since the start, by why they were made."
    );
    describe_counter!(TRANSITIONS, "Changes of state since the start.");
    describe_histogram!(
        EVIDENCE_AGE,
        Unit::Seconds,
        "House time from the newest reading of either clock to the setting that rests on it."
    );
    describe_histogram!(
        APPLIED_DELAY,
        Unit::Seconds,
        "House time from the instant of a setting to its effect, as the follower reports."
    );
    describe_gauge!(STREAMS, "Open streams, by kind.");
    describe_counter!(
        SUPERSEDED,
        "Settings that a slow watcher or follower never got, because a newer one took their place."
    );
    describe_gauge!(CONNECTIONS, "Open gRPC connections.");
    describe_counter!(
        TURNED_AWAY,
        "gRPC connections closed as they came, because there were as many as there may be."
    );
    describe_gauge!(JOURNAL_ROWS, "Events that a restart would replay.");
    describe_gauge!(STORE_BYTES, Unit::Bytes, "Size of the store on disk.");
    describe_counter!(EVENTS, "Events written to the journal since the start.");
    describe_histogram!(
        COMMIT,
        Unit::Seconds,
        "One transaction of the store, sync to disk included."
    );
}

/// Everything counted so far, in Prometheus' text format.
pub(super) fn render() -> String {
    PROCESS.collect();
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

/// A setting was published; `newest_reading_ns` is the house time of the newest reading of its clocks.
pub fn setting(setting: &Setting, newest_reading_ns: Option<HouseNs>) {
    if let Some(newest_ns) = newest_reading_ns {
        histogram!(EVIDENCE_AGE).record(seconds(setting.decided_ns - newest_ns));
    }
    counter!(SETTINGS, "reason" => reason_label(setting.reason)).increment(1);
}

fn reason_label(reason: Reason) -> &'static str {
    match reason {
        Reason::First => "first",
        Reason::Evidence => "evidence",
        Reason::Recovery => "recovery",
        Reason::Declaration => "declaration",
        Reason::Group => "group",
        Reason::Renewal => "renewal",
        Reason::ChangeOver => "changeover",
    }
}

/// A clock or a crossing changed its state.
pub fn transition(transition: &Transition) {
    let (kind, to) = match transition {
        Transition::Clock { to, .. } => ("clock", clock_state(*to)),
        Transition::Crossing { to, .. } => ("crossing", crossing_state(*to)),
        Transition::ClockFault { fault: Some(_), .. } => ("clock", "faulty"),
        Transition::ClockFault { fault: None, .. } => ("clock", "sound"),
        Transition::Centred { .. } => ("crossing", "centred"),
    };
    counter!(TRANSITIONS, "kind" => kind, "to" => to).increment(1);
}

/// A follower has said that a setting took effect, so long after its instant, ns.
pub fn applied(delay_ns: i64) {
    histogram!(APPLIED_DELAY).record(seconds(delay_ns));
}

/// Streams of a kind open now.
pub fn open_streams(kind: &'static str, open: usize) {
    gauge!(STREAMS, "kind" => kind).set(open as f64);
}

/// So many settings were replaced before a watcher or follower got them.
pub fn superseded(settings: u64) {
    counter!(SUPERSEDED).increment(settings);
}

/// gRPC connections open now.
pub fn connections(open: usize) {
    gauge!(CONNECTIONS).set(open as f64);
}

/// A gRPC connection was closed as it came.
pub fn turned_away() {
    counter!(TURNED_AWAY).increment(1);
}

/// How large the store is.
pub fn store(journal_rows: i64, bytes: u64) {
    gauge!(JOURNAL_ROWS).set(journal_rows as f64);
    gauge!(STORE_BYTES).set(bytes as f64);
}

fn seconds(ns: i64) -> f64 {
    ns.max(0) as f64 * 1e-9
}
