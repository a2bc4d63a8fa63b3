//! The commands that talk to a daemon, against a fake one.
#![allow(clippy::disallowed_methods, reason = "records are files")]

#[path = "../../tests/fake_server/mod.rs"]
mod fake_server;

use std::io::{BufRead as _, BufReader, Write as _};
use std::process::{Command, Output, Stdio};

use fake_server::{FakeServer, nearest_setting};
use ratewright_proto::v1::reading::Measurement;
use ratewright_proto::v1::{CounterReading, FrequencyReading, SenderReport, TwoWayExchange};
use serde_json::Value;

fn ratewright(server: &FakeServer, arguments: &[&str]) -> Command {
    let mut command = Command::new(env!("CARGO_BIN_EXE_ratewright"));
    command
        .args(arguments)
        .env("RATEWRIGHT_SERVER", server.address());
    command
}

/// Runs a command with this standard input.
fn run(server: &FakeServer, arguments: &[&str], input: &str) -> Output {
    let mut command = ratewright(server, arguments);
    let piped = command
        .stdin(Stdio::piped())
        .stdout(Stdio::piped())
        .stderr(Stdio::piped());
    let mut child = piped.spawn().expect("it starts");
    // A command that fails early doesn't read it.
    let _ = child
        .stdin
        .take()
        .expect("it is piped")
        .write_all(input.as_bytes());
    child.wait_with_output().expect("it ends")
}

fn text(bytes: &[u8]) -> String {
    String::from_utf8_lossy(bytes).into_owned()
}

fn measured(server: &FakeServer) -> Vec<Measurement> {
    let known = server.facility.known();
    let readings = known
        .batches
        .iter()
        .flat_map(|batch| batch.readings.clone());
    readings.filter_map(|reading| reading.measurement).collect()
}

#[test]
fn each_kind_of_csv_is_told_by_its_header() {
    for (csv, wanted) in [
        (
            "sequence,count,reference_ns\n1,48000,1000000000\n",
            Measurement::Counter(CounterReading {
                count: 48_000,
                bits: 32,
                reference_ns: 1_000_000_000,
            }),
        ),
        (
            "# a comment\nt1_ns, t2_ns, t3_ns, t4_ns\n1, 2, 3, -4\n",
            Measurement::Exchange(TwoWayExchange {
                t1_ns: 1,
                t2_ns: 2,
                t3_ns: 3,
                t4_ns: -4,
            }),
        ),
        (
            "media_timestamp,reference_ns\n960,7\n",
            Measurement::SenderReport(SenderReport {
                media_timestamp: 960,
                bits: 32,
                reference_ns: 7,
            }),
        ),
        (
            "reference_ns,drift_ppm,deviation_ppm\n5,-12.5,0.5\n",
            Measurement::Frequency(FrequencyReading {
                drift: -12.5 * 1e-6,
                deviation: 0.5 * 1e-6,
                reference_ns: 5,
            }),
        ),
    ] {
        let server = FakeServer::start();
        let output = run(
            &server,
            &["report", "desk", "--declare", "48k", "--bits", "32"],
            csv,
        );
        assert!(output.status.success(), "{csv}: {}", text(&output.stderr));
        assert_eq!(measured(&server), [wanted], "{csv}");
    }
}

#[test]
fn a_record_with_its_own_columns_and_time_base_is_read_as_it_stands() {
    let server = FakeServer::start();
    let record = "seq,node_us\n1,1512\n2,1001482\n3.5,2501482\n";
    let arguments = [
        "report",
        "node",
        "--declare",
        "1M",
        "--count-column",
        "node_us",
        "--reference-column",
        "seq",
        "--reference-unit",
        "s",
        "--reference",
        "gps",
        "--declare-reference",
        "--json",
    ];
    let output = run(&server, &arguments, record);
    assert!(output.status.success(), "{}", text(&output.stderr));
    let summary: Value = serde_json::from_slice(&output.stdout).expect("JSON");
    assert_eq!(
        (&summary["sent"], &summary["accepted"]),
        (&3.into(), &3.into())
    );
    assert_eq!(summary["clock"]["estimate"]["drift_ppm"], 12.5);
    let last = CounterReading {
        count: 2_501_482,
        bits: 64,
        reference_ns: 3_500_000_000,
    };
    assert_eq!(measured(&server).last(), Some(&Measurement::Counter(last)));
    let known = server.facility.known();
    assert!(known.clocks["clocks/gps"].exact);
    assert_eq!(
        known.clocks["clocks/node"]
            .nominal_rate
            .map(|rate| rate.numerator),
        Some(1_000_000)
    );
    assert!(
        known.batches[0]
            .readings
            .iter()
            .all(|reading| reading.reference == "clocks/gps")
    );
}

#[test]
fn what_cannot_be_read_is_named_by_its_line_and_the_rest_is_sent() {
    let server = FakeServer::start();
    let csv = "count,reference_ns\n48000,1\nmany,2\n96000\n144000,4\n";
    let output = run(&server, &["report", "desk", "--declare", "48k"], csv);
    assert_eq!(output.status.code(), Some(1));
    let printed = text(&output.stdout);
    assert!(printed.contains("2 sent, 2 taken in"), "{printed}");
    assert!(printed.contains("line 3: count is \"many\""), "{printed}");
    assert!(printed.contains("line 4: no reference_ns"), "{printed}");
}

#[test]
fn mistakes_say_what_to_type_instead() {
    let server = FakeServer::start();
    let good = "count,reference_ns\n48000,1\n";
    for (arguments, input, status, said) in [
        (&["report", "desk"][..], good, 1, "add --declare RATE"),
        (
            &["report", "desk", "--declare", "48k", "--reference", "gps"],
            good,
            1,
            "--declare-reference",
        ),
        (
            &["report", "desk", "--declare", "48k", "--declare-reference"],
            good,
            2,
            "--reference gps",
        ),
        (
            &["report", "desk", "--declare", "48k"],
            "seq,us\n1,2\n",
            2,
            "--count-column",
        ),
        (
            &["report", "desk", "--declare", "48k"],
            "",
            2,
            "no first line",
        ),
        (
            &["report", "desk", "nowhere.csv"],
            "",
            1,
            "cannot open nowhere.csv",
        ),
        (&["report", "Desk"], good, 2, "starting with a letter"),
        (&["explain", "hall-to-van/seven"], "", 2, "hall-to-van/1-7"),
        (
            &["explain", "hall-to-van"],
            "",
            1,
            "no other crossing is declared",
        ),
        (&["watch", "nowhere"], "", 1, "there is no crossing nowhere"),
        (
            &["standing", "--server", "http://127.0.0.1:1"],
            "",
            1,
            "start ratewrightd",
        ),
    ] {
        let output = run(&server, arguments, input);
        let errors = text(&output.stderr);
        assert_eq!(
            output.status.code(),
            Some(status),
            "{arguments:?}: {errors}"
        );
        assert!(errors.contains(said), "{arguments:?}: {errors}");
    }
    assert_eq!(measured(&server), [], "none of these reported anything");
}

#[test]
fn watch_prints_settings_as_they_come() {
    let server = FakeServer::start();
    server.facility.declare_crossing("hall-to-van", 256, 256);
    server
        .facility
        .publish(nearest_setting("hall-to-van", (1, 1), 1.0884, (256, 256)));
    let mut watch = ratewright(&server, &["watch", "--json"]);
    let mut watch = watch.stdout(Stdio::piped()).spawn().expect("it starts");
    let mut lines = BufReader::new(watch.stdout.take().expect("it is piped")).lines();
    let mut next = || -> Value {
        let line = lines.next().expect("a line").expect("text");
        serde_json::from_str(&line).expect("JSON")
    };
    assert_eq!(next()["setting"], "crossings/hall-to-van/settings/1-1");
    let mut bad = nearest_setting("hall-to-van", (1, 2), 1.0884, (256, 256));
    bad.certificate = nearest_setting("hall-to-van", (1, 2), 0.7, (256, 256)).certificate;
    server.facility.say(bad);
    assert!(
        next()["refused"]
            .as_str()
            .is_some_and(|why| why.contains("certificate"))
    );
    server
        .facility
        .publish(nearest_setting("hall-to-van", (1, 3), 1.0885, (256, 256)));
    assert_eq!(next()["number"], 3);
    watch.kill().expect("it runs");
    watch.wait().expect("it ends");
}

#[test]
fn standing_and_explain_print_what_the_daemon_knows() {
    let server = FakeServer::start();
    server.facility.declare_crossing("hall-to-van", 256, 256);
    server
        .facility
        .publish(nearest_setting("hall-to-van", (1, 1), 1.0884, (256, 256)));
    run(
        &server,
        &["report", "desk", "--declare", "48k"],
        "count,reference_ns\n48000,1\n",
    );
    let standing = text(&run(&server, &["standing"], "").stdout);
    for part in [
        "desk",
        "48 kHz",
        "+12.500 ± 0.020 ppm",
        "locked",
        "hall-to-van",
        "1-1",
        "holding",
    ] {
        assert!(standing.contains(part), "{part} in\n{standing}");
    }
    let document = run(&server, &["standing", "--json"], "");
    let document: Value = serde_json::from_slice(&document.stdout).expect("JSON");
    assert_eq!(document["crossings"][0]["setting"]["number"], 1);
    let explained = text(&run(&server, &["explain", "hall-to-van"], "").stdout);
    assert!(
        explained.contains("It is the nearest within the bounds."),
        "{explained}"
    );
}

#[test]
fn an_operators_acts_are_done_and_listed() {
    let server = FakeServer::start();
    server.facility.declare_crossing("hall-to-van", 256, 256);
    server
        .facility
        .publish(nearest_setting("hall-to-van", (1, 7), 1.0884, (256, 256)));
    let does = |arguments: &[&str]| {
        let output = run(&server, arguments, "");
        assert!(output.status.success(), "{}", text(&output.stderr));
        text(&output.stdout)
    };
    let none = does(&["acts", "hall-to-van"]);
    assert_eq!(none, "nobody has acted on hall-to-van\n");

    let pinned = does(&["pin", "hall-to-van", "--by", "Ada", "--note", "on air"]);
    assert!(
        pinned.starts_with("hall-to-van is pinned; its setting is 1-7"),
        "{pinned}"
    );
    let standing = does(&["standing"]);
    assert!(standing.contains("holding, pinned by Ada"), "{standing}");
    let changed = does(&["changeover", "hall-to-van", "spare", "--by", "Ben"]);
    assert!(changed.contains("takes its stream from spare"), "{changed}");
    let released = does(&["release", "hall-to-van", "--by", "Ada", "--json"]);
    let released: Value = serde_json::from_str(&released).expect("JSON");
    assert_eq!(released["pin"], Value::Null);
    assert_eq!(released["source_in_use"], "spare");

    let listed = does(&["acts", "hall-to-van"]);
    let lines: Vec<&str> = listed.lines().collect();
    assert_eq!(lines.len(), 4, "{listed}");
    assert!(lines[1].contains("released"), "{listed}");
    assert!(
        lines[2].contains("changed over from a to spare"),
        "{listed}"
    );
    assert!(
        lines[3].contains("pinned") && lines[3].contains("on air"),
        "{listed}"
    );
    let newest = does(&["acts", "hall-to-van", "--most", "1", "--json"]);
    let newest: Value = serde_json::from_str(&newest).expect("JSON");
    assert_eq!(newest.as_array().map(Vec::len), Some(1));
    assert_eq!(
        (&newest[0]["by"], &newest[0]["what"]),
        (&"Ada".into(), &"released".into())
    );

    let anonymous = run(&server, &["pin", "hall-to-van"], "");
    assert_eq!(anonymous.status.code(), Some(2));
    assert!(text(&anonymous.stderr).contains("--by"));
}

#[test]
fn a_mistyped_name_is_answered_with_those_that_exist() {
    let server = FakeServer::start();
    for id in ["hall-to-van", "van-to-hall", "film"] {
        server.facility.declare_crossing(id, 256, 256);
    }
    let good = "count,reference_ns\n48000,1\n";
    run(&server, &["report", "desk", "--declare", "48k"], good);
    for (arguments, said) in [
        (
            &["explain", "hal-to-van"][..],
            "no crossing hal-to-van; meant may be hall-to-van",
        ),
        (
            &["watch", "film", "van"],
            "meant may be hall-to-van or van-to-hall",
        ),
        (
            &["pin", "flim", "--by", "someone"],
            "no crossing flim; meant may be film",
        ),
        (
            &["explain", "gramophone"],
            "there is film, hall-to-van or van-to-hall",
        ),
        (
            &["report", "dsek"],
            "clock dsek is not declared; meant may be desk; or add --declare RATE",
        ),
    ] {
        let output = run(&server, arguments, good);
        let errors = text(&output.stderr);
        assert_eq!(output.status.code(), Some(1), "{arguments:?}: {errors}");
        assert!(errors.contains(said), "{arguments:?}: {errors}");
    }
}

/// Without a terminal there is no bar and no colour, whatever is asked for.
#[test]
fn nothing_is_drawn_where_there_is_no_terminal() {
    let server = FakeServer::start();
    let folder = tempfile::tempdir().expect("a folder");
    let record = folder.path().join("record.csv");
    let rows: String = (1..3_000)
        .map(|second| format!("{},{}000000000\n", 48_000 * second, 1_799_997_000 + second))
        .collect();
    std::fs::write(&record, format!("count,reference_ns\n{rows}")).expect("it is written");
    let record = record.to_str().expect("a path in UTF-8");
    let output = run(&server, &["report", "desk", record, "--declare", "48k"], "");
    assert!(output.status.success(), "{}", text(&output.stderr));
    assert_eq!(text(&output.stderr), "");
    let printed = text(&output.stdout);
    assert!(printed.contains("2999 sent, 2999 taken in"), "{printed}");
    assert!(!printed.contains('\x1b'), "{printed}");
}
