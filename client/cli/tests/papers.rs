//! What the command writes of itself: completions and man pages.
#![allow(clippy::disallowed_methods, reason = "man pages are files")]

use std::process::{Command, Output};

fn ratewright(arguments: &[&str]) -> Output {
    let mut command = Command::new(env!("CARGO_BIN_EXE_ratewright"));
    command.args(arguments).output().expect("it starts")
}

/// Every command that `--help` lists.
fn commands() -> Vec<String> {
    let help = ratewright(&["--help"]);
    let help = String::from_utf8(help.stdout).expect("UTF-8");
    let listed = help
        .lines()
        .skip_while(|line| *line != "Commands:")
        .skip(1)
        .take_while(|line| !line.is_empty());
    let names = listed.filter_map(|line| line.split_whitespace().next().map(str::to_owned));
    let names: Vec<String> = names.filter(|name| name != "help").collect();
    assert!(names.len() > 10, "{help}");
    names
}

#[test]
fn each_shell_learns_every_command() {
    for shell in ["bash", "zsh", "fish", "elvish", "powershell"] {
        let output = ratewright(&["completions", shell]);
        assert!(output.status.success(), "{shell}: {output:?}");
        let script = String::from_utf8(output.stdout).expect("UTF-8");
        for command in commands() {
            assert!(script.contains(&command), "{shell} does not know {command}");
        }
        assert!(script.contains("from-drift"), "{shell} knows no options");
    }
}

#[test]
fn each_command_has_a_man_page() {
    let folder = tempfile::tempdir().expect("a folder");
    let pages = folder.path().join("man").join("man1");
    let output = ratewright(&["manual", pages.to_str().expect("a path in UTF-8")]);
    assert!(output.status.success(), "{output:?}");
    let page = |name: &str| std::fs::read_to_string(pages.join(name)).expect(name);
    assert!(page("ratewright.1").contains("Exit status"));
    for command in commands() {
        let page = page(&format!("ratewright-{command}.1"));
        assert!(page.starts_with(".ie") || page.contains(".TH"), "{page}");
    }
    assert!(page("ratewright-plan.1").contains("headroom"));
}

/// Commands that tell something tell it to machines too.
#[test]
fn every_command_that_tells_something_has_json() {
    for command in commands() {
        let path: &[&str] = match command.as_str() {
            "completions" | "manual" => continue,
            "probe" => &["probe", "host"],
            command => &[command],
        };
        let help = ratewright(&[path, &["--help"]].concat());
        let help = String::from_utf8(help.stdout).expect("UTF-8");
        assert!(help.contains("--json"), "{command}: {help}");
    }
}
