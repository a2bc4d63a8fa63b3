//! Whole-system tests and outside references.
//!
//! The tests stand in `tests/`, longer runs to look at in `examples/`; this library holds what they
//! share.

#![allow(
    clippy::disallowed_methods,
    reason = "whole systems are started and looked at from outside"
)]

pub mod chaos;
pub mod sound;

use std::{
    path::{Path, PathBuf},
    process::Command,
};

/// Root of the workspace.
///
/// # Panics
/// If this crate was moved out of the workspace.
#[must_use]
pub fn workspace() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR"))
        .parent()
        .expect("the tests crate lies in the workspace")
        .to_owned()
}

/// Names of all packages in the dependency tree of `package`, build and test dependencies
/// left out.
///
/// # Panics
/// If cargo cannot tell.
#[must_use]
pub fn dependencies(package: &str) -> Vec<String> {
    let output = Command::new(env!("CARGO"))
        .current_dir(workspace())
        .args([
            "tree",
            "--package",
            package,
            "--edges",
            "normal",
            "--prefix",
            "none",
        ])
        .args(["--format", "{p}", "--offline"])
        .output()
        .expect("cargo runs, since it runs this test");
    assert!(
        output.status.success(),
        "{}",
        String::from_utf8_lossy(&output.stderr)
    );
    String::from_utf8_lossy(&output.stdout)
        .lines()
        .filter_map(|line| line.split_whitespace().next().map(str::to_owned))
        .collect()
}

/// A binary of the workspace. `cargo test --workspace` has built it before any test runs; where
/// it is missing or older than its sources (this package tested alone) it is built now.
///
/// # Panics
/// If it does not build.
#[must_use]
pub fn binary(package: &str, name: &str) -> PathBuf {
    let own = std::env::current_exe().expect("this test lies somewhere");
    let built = own
        .ancestors()
        .nth(2)
        .expect("tests lie in a folder of the build");
    let path = built.join(name);
    if !is_fresh(&path) {
        let mut build = Command::new(env!("CARGO"));
        build.current_dir(workspace()).args(["build", "--quiet"]);
        build.args(["--package", package, "--bin", name]);
        if built.ends_with("release") {
            build.arg("--release");
        }
        let status = build.status().expect("cargo runs, since it runs this test");
        assert!(status.success(), "{name} does not build");
    }
    path
}

/// Whether a binary is there, made of nothing but this workspace's sources and what was generated
/// from them, and none of those has changed since: cargo notes them beside it.
fn is_fresh(binary: &Path) -> bool {
    let changed = |file: &Path| file.metadata().and_then(|file| file.modified()).ok();
    let notes = std::fs::read_to_string(binary.with_extension("d")).unwrap_or_default();
    let (Some(built), Some((_, sources))) = (changed(binary), notes.split_once(": ")) else {
        return false;
    };
    let (ours, generated) = (workspace(), binary.ancestors().nth(2));
    // A space within a name is written with a backslash before it.
    let sources = sources.replace("\\ ", "\0");
    sources.split_whitespace().all(|source| {
        let source = PathBuf::from(source.replace('\0', " "));
        let is_here = source.starts_with(&ours) || generated.is_some_and(|g| source.starts_with(g));
        is_here && changed(&source).is_some_and(|changed| changed <= built)
    })
}
