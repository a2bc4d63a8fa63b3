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
    time::SystemTime,
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
    let tree = tree(package);
    tree.lines()
        .filter_map(|line| line.split_whitespace().next().map(str::to_owned))
        .collect()
}

/// A package a line: its name, its version, and its folder in brackets if it is one of ours.
fn tree(package: &str) -> String {
    let output = Command::new(env!("CARGO"))
        .current_dir(workspace())
        .args(["tree", "--package", package, "--edges", "normal"])
        .args(["--prefix", "none", "--format", "{p}", "--offline"])
        .output()
        .expect("cargo runs, since it runs this test");
    assert!(
        output.status.success(),
        "{}",
        String::from_utf8_lossy(&output.stderr)
    );
    String::from_utf8_lossy(&output.stdout).into_owned()
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
    if !is_fresh(&path, package) {
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

/// Whether a binary is there, and no source of ours that it is made of has changed since.
fn is_fresh(binary: &Path, package: &str) -> bool {
    let Some(built) = changed(binary) else {
        return false;
    };
    let tree = tree(package);
    let ours = tree
        .lines()
        .filter_map(|line| line.split_once(" (/")?.1.split(')').next());
    ours.map(|folder| Path::new("/").join(folder))
        .flat_map(|folder| {
            ["src", "build.rs", "Cargo.toml", "ratewright"].map(|of| folder.join(of))
        })
        .all(|source| newest(&source).is_none_or(|changed| changed <= built))
}

fn changed(file: &Path) -> Option<SystemTime> {
    file.metadata().and_then(|file| file.modified()).ok()
}

/// When a file, or any within a folder, was last changed.
fn newest(path: &Path) -> Option<SystemTime> {
    match std::fs::read_dir(path) {
        Ok(entries) => entries
            .flatten()
            .filter_map(|entry| newest(&entry.path()))
            .max(),
        Err(_) => changed(path),
    }
}
