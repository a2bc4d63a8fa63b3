//! `ratewright rehearse` as people and machines see it.
#![allow(clippy::disallowed_methods, reason = "rehearsals are files")]

use std::path::Path;
use std::process::{Command, Output};

use serde_json::Value;

const EXAMPLE: &str = "../../deploy/rehearsal.example.toml";

fn rehearse(file: &Path, more: &[&str]) -> Output {
    let mut command = Command::new(env!("CARGO_BIN_EXE_ratewright"));
    command
        .arg("rehearse")
        .arg(file)
        .args(more)
        .output()
        .expect("it starts")
}

fn written(folder: &tempfile::TempDir, text: &str) -> std::path::PathBuf {
    let path = folder.path().join("facility.toml");
    std::fs::write(&path, text).expect("the folder is there");
    path
}

/// 10 ppm of 48 kHz are 0.48 samples a second: without a follower a headroom of 10 lasts 21 s.
const SLIPS: &str = r#"
days = 0.002
[[host]]
id = "host"
[[clock]]
id = "desk"
rate = 48000
host = "host"
truth = { drift_ppm = 10 }
[[clock]]
id = "house"
rate = 48000
exact = true
[[crossing]]
id = "line"
source = "desk"
sink = "house"
headroom_samples = 10
[[event]]
what = "follower-stuck"
crossing = "line"
at_s = 1.005
"#;

#[test]
fn the_example_holds_and_is_drawn() {
    let folder = tempfile::tempdir().expect("a folder can be made");
    let pictures = folder.path().join("pictures");
    let pictures_text = pictures.to_str().expect("it is Unicode");
    let output = rehearse(
        Path::new(EXAMPLE),
        &["--days", "0.02", "--pictures", pictures_text],
    );
    let (text, said) = (
        String::from_utf8_lossy(&output.stdout),
        String::from_utf8_lossy(&output.stderr),
    );
    assert_eq!(output.status.code(), Some(0), "{text}{said}");
    assert!(
        text.contains("Nothing slipped.") && !text.contains("refused"),
        "{text}"
    );
    for crossing in ["studio-programme", "truck-programme", "web"] {
        assert!(text.contains(crossing), "{text}");
        let picture =
            std::fs::read_to_string(pictures.join(format!("{crossing}.svg"))).expect(crossing);
        assert!(picture.contains(&format!("<title>{crossing}: phase error</title>")));
    }
}

#[test]
fn a_slip_has_its_own_exit_status() {
    let folder = tempfile::tempdir().expect("a folder can be made");
    let file = written(&folder, SLIPS);
    let output = rehearse(&file, &[]);
    assert_eq!(output.status.code(), Some(3), "{output:?}");
    assert!(
        String::from_utf8_lossy(&output.stdout).contains("line slipped, first after"),
        "{output:?}"
    );
    assert!(output.stderr.is_empty(), "{output:?}");
}

#[test]
fn machines_get_every_seed_and_always_the_same() {
    let folder = tempfile::tempdir().expect("a folder can be made");
    let file = written(&folder, SLIPS);
    let once = rehearse(&file, &["--seeds", "3", "--json"]);
    assert_eq!(once.status.code(), Some(3));
    assert_eq!(
        once.stdout,
        rehearse(&file, &["--seeds", "3", "--json"]).stdout
    );
    let document: Value = serde_json::from_slice(&once.stdout).expect("JSON");
    assert_eq!(document["slipped"], true);
    let seeds = document["seeds"].as_array().expect("a list");
    let numbers: Vec<_> = seeds.iter().map(|seed| seed["seed"].as_u64()).collect();
    assert_eq!(numbers, [Some(1), Some(2), Some(3)]);
    for seed in seeds {
        let line = &seed["crossings"][0];
        let slip_s = line["first_slip_seconds"].as_f64().expect("it slipped");
        assert!((21.0..=32.0).contains(&slip_s), "{slip_s}");
    }
}

#[test]
fn a_faulty_file_is_refused_whole_with_lines() {
    let folder = tempfile::tempdir().expect("a folder can be made");
    let file = written(
        &folder,
        "days = 0\n\n[[clock]]\nid = \"desk\"\nrate = 48000\nhots = \"x\"\n",
    );
    let output = rehearse(&file, &[]);
    assert_eq!(output.status.code(), Some(78));
    assert!(output.stdout.is_empty());
    let said = String::from_utf8_lossy(&output.stderr).into_owned();
    for line in [
        "facility.toml:1: days is 0",
        ":3: clock[0].host is missing",
        ":6: clock[0].hots is no key",
    ] {
        assert!(said.contains(line), "{said}");
    }
    let missing = rehearse(Path::new("nowhere.toml"), &[]);
    assert_eq!(missing.status.code(), Some(78));
    assert!(String::from_utf8_lossy(&missing.stderr).contains("nowhere.toml: cannot be read"));
}
