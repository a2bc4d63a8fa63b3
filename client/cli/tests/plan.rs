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
fn limits_of_other_kinds_are_as_approved() {
    let rates = ["plan", "--from", "44.1k", "--to", "48k"];
    let with = |more: &[&'static str]| [&rates[..], more].concat();
    check("product.txt", &with(&["--max-product", "1000"]));
    check(
        "weighted.txt",
        &with(&[
            "--max-cost",
            "300",
            "--weight-m",
            "3",
            "--to-drift",
            "10±1",
            "--json",
        ]),
    );
    check("multiple-of-l.txt", &with(&["--l-multiple-of", "320"]));
    check(
        "multiple-of-m.txt",
        &with(&["--m-multiple-of", "48", "--json"]),
    );
    check("fixed-m.txt", &with(&["--fixed-m", "65536"]));
    check(
        "power-of-two.txt",
        &with(&["--power-of-two-m", "--max-m", "65536"]),
    );
}

#[test]
fn wishes_are_as_approved() {
    let rates = ["plan", "--from", "192k", "--to", "44.1k"];
    let filter = ["--passband", "20k", "--attenuation", "120"];
    check("stages.txt", &[&rates[..], &filter].concat());
    let short = ["plan", "--from", "44.1k", "--to", "29.4k", "--json"];
    let filter = ["--passband", "12.5k", "--attenuation", "90"];
    check("stages-document.txt", &[&short[..], &filter].concat());
    let target = ["plan", "--target", "1.0000373", "--max-m", "64"];
    check(
        "stepping.txt",
        &[&target[..], &["--phases", "256"]].concat(),
    );
    let broadcast = ["plan", "--from", "44.1k", "--to", "48k"];
    let ntsc = ["--frames", "30000/1001"];
    check("frames.txt", &[&broadcast[..], &ntsc].concat());
}

/// Each picture is one of its own, says what it shows, and names the best ratio.
#[test]
fn pictures_are_drawn_into_files() {
    let folder = tempfile::tempdir().expect("a folder");
    let file = folder.path().join("plan.svg");
    let path = file.to_str().expect("a path in UTF-8");
    let rates = [
        "plan",
        "--from",
        "44.1k",
        "--to",
        "48k",
        "--from-drift",
        "12.5±0.3",
    ];
    let mut drawn = Vec::new();
    for (subject, title) in [
        ("ladder", "The ladder: what a larger filter bank buys"),
        ("fractions", "The fractions around the target"),
    ] {
        let wish = ["--picture", path, "--picture-of", subject];
        let output = ratewright(&[&rates[..], &wish].concat());
        assert!(output.status.success(), "{output:?}");
        let picture = std::fs::read_to_string(&file).expect("it was drawn");
        assert!(picture.starts_with("<?xml") && picture.ends_with("</svg>\n"));
        assert!(picture.contains(title), "{subject}");
        let best = document(&rates[1..])["best"].clone();
        assert!(
            picture.contains(&format!("{}/{}", best["l"], best["m"])),
            "{subject}"
        );
        drawn.push(picture);
    }
    assert_ne!(drawn[0], drawn[1]);
    let nowhere = ratewright(&[&rates[..], &["--picture", "no/such/folder/plan.svg"]].concat());
    assert_eq!(nowhere.status.code(), Some(1));
}

/// Each line of a plan for people keeps within 100 columns, the picture within 80.
#[test]
fn the_ladder_is_drawn_within_80_columns() {
    for more in [
        &[
            "--to-drift",
            "0.000001",
            "--max-l",
            "9223372036854775807",
            "--max-m",
            "9223372036854775807",
        ][..],
        &["--max-l", "16", "--max-m", "16"],
        &["--largest-prime", "7"],
        &["--power-of-two-m"],
    ] {
        let output = ratewright(&[&["plan", "--from", "44.1k", "--to", "48k"], more].concat());
        let printed = String::from_utf8(output.stdout).expect("UTF-8");
        let picture: Vec<&str> = printed.lines().filter(|line| line.contains('│')).collect();
        assert!(!picture.is_empty() && picture.len() <= 9, "{printed}");
        for line in &picture {
            assert!(line.chars().count() <= 80, "{line}");
        }
        assert_eq!(
            printed.matches('■').count(),
            1,
            "one is the best: {printed}"
        );
    }
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
    let one = |more: &[&'static str]| [&["plan", "--target", "1"], more].concat();
    check(
        "two-limits.txt",
        &one(&["--fixed-m", "64", "--max-product", "1000"]),
    );
    check(
        "replaced-bound.txt",
        &one(&["--max-product", "1000", "--max-l", "32"]),
    );
    check(
        "prime-and-multiple.txt",
        &one(&["--l-multiple-of", "6", "--largest-prime", "7"]),
    );
    check("bad-multiple.txt", &one(&["--m-multiple-of", "2000"]));
    check("bad-cost.txt", &one(&["--max-cost", "1"]));
    check(
        "no-rates.txt",
        &one(&["--passband", "20k", "--attenuation", "100"]),
    );
    check("bad-phases.txt", &one(&["--phases", "0"]));
    check("bad-picture.txt", &one(&["--picture", "plan.png"]));
    let rates = ["plan", "--from", "44.1k", "--to", "48k"];
    let with = |more: &[&'static str]| [&rates[..], more].concat();
    check(
        "bad-passband.txt",
        &with(&["--passband", "22.05k", "--attenuation", "100"]),
    );
    check(
        "bad-attenuation.txt",
        &with(&["--passband", "20k", "--attenuation", "20.9"]),
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

/// What a limit allows is nearest among all it allows, and a cadence of it averages the target.
#[test]
fn limits_hold_and_their_nearest_is_the_nearest() {
    type Kind = (&'static [&'static str], fn(u64, u64) -> bool);
    let kinds: [Kind; 6] = [
        (&["--max-product", "3000"], |l, m| l * m <= 3_000),
        (
            &["--max-cost", "200", "--weight-l", "2", "--weight-m", "1"],
            |l, m| 2 * l + m <= 200,
        ),
        (
            &["--l-multiple-of", "6", "--max-l", "90", "--max-m", "99"],
            |l, m| l % 6 == 0 && l <= 90 && m <= 99,
        ),
        (
            &["--m-multiple-of", "8", "--max-l", "90", "--max-m", "99"],
            |l, m| m % 8 == 0 && l <= 90 && m <= 99,
        ),
        (&["--fixed-m", "77"], |_, m| m == 77),
        (&["--power-of-two-m", "--max-m", "70"], |_, m| {
            m.is_power_of_two() && m <= 70
        }),
    ];
    // A prime numerator beyond every limit, so that nothing is exact.
    let (n, d) = (10_007_u64, 9_000_u64);
    for (limit, is_allowed) in kinds {
        let plan = document(&[&["--target", "10007/9000"], limit].concat());
        let whole = |value: &Value| value.as_u64().expect("a count");
        let error = |l: u64, m: u64| (l * d).abs_diff(m * n) as f64 / m as f64;
        let (l, m) = (whole(&plan["best"]["l"]), whole(&plan["best"]["m"]));
        assert!(is_allowed(l, m), "{limit:?}: {l}/{m}");
        for (other_l, other_m) in (1..1_600).flat_map(|l| (1..1_600).map(move |m| (l, m))) {
            let is_nearer = error(other_l, other_m) < error(l, m) * (1.0 - 1e-12);
            assert!(
                !(is_nearer && is_allowed(other_l, other_m)),
                "{limit:?}: {other_l}/{other_m} is nearer than {l}/{m}"
            );
        }
        let last = plan["ladder"].as_array().and_then(|ladder| ladder.last());
        let last = last.expect("a rung");
        assert_eq!(
            (&last["l"], &last["m"]),
            (&l.into(), &m.into()),
            "{limit:?}"
        );
        let pair = [&plan["cadence"]["low"], &plan["cadence"]["high"]];
        let sum = |part: &str| -> u64 {
            let blocks = pair.iter();
            blocks
                .map(|block| whole(&block["count"]) * whole(&block[part]))
                .sum()
        };
        assert_eq!(sum("l") * d, sum("m") * n, "{limit:?}");
        for block in pair {
            assert!(
                is_allowed(whole(&block["l"]), whole(&block["m"])),
                "{limit:?}"
            );
        }
    }
}

/// Every chain multiplies to the best ratio, costs what its stages cost, and none beats another.
#[test]
fn chains_of_stages_make_the_best_ratio() {
    let rates = ["--from", "96k", "--to", "44.1k"];
    let filter = ["--passband", "20k", "--attenuation", "100"];
    let plan = document(&[rates, filter].concat());
    let chains = plan["stages"]["chains"].as_array().expect("chains");
    assert!(chains.len() > 3, "{chains:?}");
    let mut costs = Vec::new();
    for chain in chains {
        let stages = chain["stages"].as_array().expect("stages");
        let product =
            |part: &str| -> u64 { stages.iter().filter_map(|s| s[part].as_u64()).product() };
        assert_eq!((product("l"), product("m")), (147, 320));
        let held = |stage: &Value| Some(stage["l"].as_u64()? * stage["taps_per_phase"].as_u64()?);
        let coefficients: u64 = stages.iter().filter_map(held).sum();
        assert_eq!(chain["coefficients"], coefficients);
        let of = |cost: &str| chain[cost].as_f64().expect("a number");
        costs.push(["multiply_adds", "coefficients", "delay_seconds"].map(of));
    }
    let beats = |a: &[f64; 3], b: &[f64; 3]| a != b && a.iter().zip(b).all(|(a, b)| a <= b);
    assert!(costs.iter().all(|b| !costs.iter().any(|a| beats(a, b))));
}

/// The samples of a period's frames are the samples of the period, at rates of any kind.
#[test]
fn frames_of_a_period_add_up() {
    for rate in ["24", "25", "24000/1001", "30000/1001", "60000/1001"] {
        let plan = document(&["--from", "44.1k", "--to", "48k*1000/1001", "--frames", rate]);
        for end in ["source", "sink"] {
            let frames = &plan["frames"][end];
            let samples = frames["samples"].as_array().expect("frames");
            assert_eq!(frames["period_frames"], samples.len());
            let sum: u64 = samples.iter().filter_map(Value::as_u64).sum();
            assert_eq!(frames["period_samples"], sum, "{end} at {rate}");
        }
    }
}
