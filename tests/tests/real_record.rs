//! A real clock, recorded: reported through the command line to a daemon, its estimate must end
//! at the rate that an independent fit gives for the end of the record.
#![allow(
    clippy::disallowed_methods,
    reason = "a whole system: processes, sockets and files"
)]

use std::process::{Command, Output};

use ratewright_server::{Daemon, config::Config};
use ratewright_tests::{binary, workspace};
use serde_json::Value;

/// Least-squares rate over pulses 3000 to 3588, the last ten minutes: numpy 2.4.6 `polyfit`. The
/// rate has all but settled there: the ten minutes before differ by 0.008 ppm.
/// (`tests/data/README.md` has the source of the record.)
const END_RATE_PPM: f64 = -5.476_489_885;

async fn daemon(store: &std::path::Path) -> Daemon {
    let config = Config {
        grpc: "127.0.0.1:0".parse().expect("an address"),
        people: "127.0.0.1:0".parse().expect("an address"),
        store: store.to_owned(),
        ..Config::default()
    };
    Daemon::builder(config).start().await.expect("it starts")
}

async fn report(daemon: &Daemon, file: std::path::PathBuf) -> Output {
    let server = format!("http://{}", daemon.grpc());
    let command = move || {
        Command::new(binary("ratewright-cli", "ratewright"))
            .args([
                "report",
                "node",
                "--declare",
                "1M",
                "--json",
                "--server",
                &server,
            ])
            .args(["--count-column", "node_us", "--bits", "64"])
            .args(["--reference-column", "seq", "--reference-unit", "s"])
            .args(["--reference", "gps", "--declare-reference"])
            .arg(file)
            .output()
            .expect("it runs")
    };
    tokio::task::spawn_blocking(command)
        .await
        .expect("no panic")
}

fn ppm(summary: &Value, key: &str) -> f64 {
    summary["clock"]["estimate"][key]
        .as_f64()
        .unwrap_or_else(|| panic!("no {key} in {summary}"))
}

#[tokio::test(flavor = "multi_thread")]
async fn a_recorded_clock_ends_at_its_known_rate() {
    let store = tempfile::tempdir().expect("a folder");
    let daemon = daemon(store.path()).await;
    let record = workspace().join("tests/data/node_clock_at_gps_pps_1h.csv");
    let output = report(&daemon, record).await;
    let said = String::from_utf8_lossy(&output.stderr);
    assert!(output.status.success(), "{said}");
    let summary: Value = serde_json::from_slice(&output.stdout).expect("JSON");
    assert_eq!(summary["accepted"], 3589);
    let (low, high) = (
        ppm(&summary, "drift_low_ppm"),
        ppm(&summary, "drift_high_ppm"),
    );
    assert!(
        (low..=high).contains(&END_RATE_PPM),
        "{END_RATE_PPM} is not in {low}..{high}"
    );
    assert!(
        (ppm(&summary, "drift_ppm") - END_RATE_PPM).abs() <= 0.2,
        "{summary}"
    );
    assert!(high - low <= 0.2, "too little was learned: {low}..{high}");
    daemon.drain().await.expect("a clean end");
}

#[tokio::test(flavor = "multi_thread")]
async fn a_bent_line_is_refused_by_its_number_and_the_rest_counts() {
    let store = tempfile::tempdir().expect("a folder");
    let daemon = daemon(store.path()).await;
    let bent = store.path().join("bent.csv");
    let lines: String = (1..=100)
        .map(|second| match second {
            50 => "7,7000000\n".to_owned(), // a second that is long past
            _ => format!("{second},{}\n", second * 1_000_000),
        })
        .collect();
    std::fs::write(&bent, format!("seq,node_us\n{lines}")).expect("a file");
    let output = report(&daemon, bent).await;
    assert_eq!(output.status.code(), Some(1));
    let summary: Value = serde_json::from_slice(&output.stdout).expect("JSON");
    assert_eq!(
        (&summary["sent"], &summary["accepted"]),
        (&100.into(), &99.into())
    );
    let refused = summary["refusals"].to_string();
    assert!(
        refused.contains("51") && refused.contains("7000000000"),
        "{refused}"
    );
    daemon.drain().await.expect("a clean end");
}
