//! `ratewright plan` as people and machines see it.
//!
//! The golden texts are written anew with `RATEWRIGHT_REWRITE=1 cargo test -p ratewright-cli`.
#![allow(clippy::disallowed_methods, reason = "golden texts are files")]

use std::path::Path;
use std::process::{Command, Output};

use serde_json::Value;

fn ratewright(arguments: &[&str]) -> Output {
    let mut command = Command::new(env!("CARGO_BIN_EXE_ratewright"));
    command
        .args(arguments)
        .env_remove("RATEWRIGHT_SERVER")
        .output()
        .expect("it starts")
}

fn document(arguments: &[&str]) -> Value {
    let output = ratewright(&[&["plan", "--json"], arguments].concat());
    assert!(output.status.success(), "{arguments:?}: {output:?}");
    serde_json::from_slice(&output.stdout).expect("JSON")
}

/// Compares what a command prints with what it printed when the text was approved.
fn check(name: &str, arguments: &[&str]) {
    let output = ratewright(arguments);
    let (out, err) = (&output.stdout, &output.stderr);
    let printed = format!(
        "$ ratewright {}\n{}{}exit status {}\n",
        arguments.join(" "),
        String::from_utf8_lossy(out),
        String::from_utf8_lossy(err),
        output.status.code().expect("it ended by itself"),
    );
    let path = Path::new(env!("CARGO_MANIFEST_DIR"))
        .join("tests/golden")
        .join(name);
    if std::env::var_os("RATEWRIGHT_REWRITE").is_some() {
        std::fs::write(&path, &printed).expect("the folder is there");
    }
    let approved = std::fs::read_to_string(&path).expect(name);
    assert_eq!(printed, approved, "{name} is not as approved");
}

#[test]
fn texts_are_as_approved() {
    let rates = ["plan", "--from", "44.1k", "--to", "48k"];
    let with = |more: &[&'static str]| [&rates[..], more].concat();
    check("nominal.txt", &with(&["--max-l", "256", "--max-m", "256"]));
    check(
        "drift.txt",
        &with(&["--from-drift", "12.5±0.3", "--to-drift", "-3+-0.1"]),
    );
    check(
        "smooth.txt",
        &with(&["--to-drift", "1000", "--largest-prime", "7"]),
    );
    check(
        "same-rate.txt",
        &[
            "plan",
            "--target",
            "1.0000373",
            "--max-l",
            "64",
            "--max-m",
            "64",
        ],
    );
    check(
        "out-of-reach.txt",
        &["plan", "--from", "8k", "--to", "192k", "--max-l", "16"],
    );
    check(
        "document.txt",
        &with(&["--from-drift", "12.5±0.3", "--json"]),
    );
}

#[test]
fn mistakes_say_what_to_type_instead() {
    check("no-sink.txt", &["plan", "--from", "44.1k"]);
    check("bad-rate.txt", &["plan", "--from", "fast", "--to", "48k"]);
    check(
        "bad-drift.txt",
        &["plan", "--target", "1", "--to-drift", "-1e3"],
    );
    check("bad-bound.txt", &["plan", "--target", "1", "--max-l", "0"]);
    check(
        "bad-headroom.txt",
        &["plan", "--target", "1", "--headroom", "nan"],
    );
    check(
        "two-questions.txt",
        &["plan", "--target", "1", "--from", "44.1k", "--to", "48k"],
    );
}

#[test]
fn the_document_answers_the_worked_example() {
    let rates = [
        "--from", "44100", "--to", "48000", "--max-l", "256", "--max-m", "256",
    ];
    let plan = document(&rates);
    assert_eq!(plan["target"], "160/147");
    let best = &plan["best"];
    assert_eq!((&best["l"], &best["m"]), (&160.into(), &147.into()));
    assert_eq!(
        (&best["exact"], &best["residual_ppb"]),
        (&true.into(), &0.0.into())
    );
    assert!(best["seconds_to_slip"].is_null() && plan["cadence"].is_null());
    assert_eq!(best["certificate"]["above"], "160/147");
    let last = plan["ladder"]
        .as_array()
        .and_then(|ladder| ladder.last())
        .expect("a rung");
    assert_eq!((&last["l"], &last["m"]), (&160.into(), &147.into()));
}

/// The cadence of a plan averages its target exactly, its certificate encloses it, and the slip is
/// the headroom over the rate of the phase error.
#[test]
fn the_parts_of_a_document_agree() {
    let plan = document(&[
        "--from",
        "48k",
        "--to",
        "48k",
        "--to-drift",
        "2.25",
        "--headroom",
        "0.5",
    ]);
    let whole = |value: &Value| u128::from(value.as_u64().expect("a count"));
    let fraction = |value: &Value| {
        let text = value.as_str().expect("n/d");
        let (n, d) = text.split_once('/').expect("n/d");
        (
            n.parse::<u128>().expect("digits"),
            d.parse::<u128>().expect("digits"),
        )
    };
    let (n, d) = fraction(&plan["target"]);
    let pair = [&plan["cadence"]["low"], &plan["cadence"]["high"]];
    let sum = |part: &str| -> u128 {
        pair.iter()
            .map(|block| whole(&block["count"]) * whole(&block[part]))
            .sum()
    };
    assert_eq!(sum("l") * d, sum("m") * n);

    let (below, above) = (
        fraction(&plan["best"]["certificate"]["below"]),
        fraction(&plan["best"]["certificate"]["above"]),
    );
    assert!(below.0 * d <= n * below.1 && n * above.1 <= above.0 * d);
    assert_eq!(above.0 * below.1 - below.0 * above.1, 1, "neighbours");

    let residual = plan["best"]["residual_ppb"].as_f64().expect("a number") * 1e-9;
    let slip = plan["best"]["seconds_to_slip"].as_f64().expect("a number");
    let true_sink_hz = 48_000.0 * (1.0 + 2.25e-6);
    assert!((slip * true_sink_hz * residual.abs() / 0.5 - 1.0).abs() < 1e-12);
}

#[test]
fn an_interval_gives_its_ends_and_its_simplest_ratio() {
    let plan = document(&[
        "--target",
        "1",
        "--to-drift",
        "100±50",
        "--max-l",
        "4096",
        "--max-m",
        "4096",
    ]);
    assert_eq!(plan["interval"]["low"], "20001/20000");
    assert_eq!(plan["interval"]["high"], "20003/20000");
    // 1 + 1/m is within 50 to 150 ppm from m = 6667 on.
    assert_eq!(plan["interval"]["simplest"]["m"], 6667);
    assert!(
        plan["interval"]["seconds_to_slip_at_worst"].is_null(),
        "no sink rate is known"
    );
}
