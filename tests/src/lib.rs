//! Whole-system tests and outside references.
//!
//! The tests stand in `tests/`; this library holds nothing but their shared footing.

use serde_json::Value;
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
        .args(["tree", "--package", package, "--edges", "normal", "--prefix", "none"])
        .args(["--format", "{p}", "--offline"])
        .output()
        .expect("cargo runs, since it runs this test");
    assert!(output.status.success(), "{}", String::from_utf8_lossy(&output.stderr));
    String::from_utf8_lossy(&output.stdout)
        .lines()
        .filter_map(|line| line.split_whitespace().next().map(str::to_owned))
        .collect()
}

/// A JSON field by a path of keys, for messages that name what is missing.
///
/// # Panics
/// If the path leads nowhere.
#[must_use]
pub fn at<'a>(value: &'a Value, path: &[&str]) -> &'a Value {
    path.iter().fold(value, |here, key| {
        here.get(key).unwrap_or_else(|| panic!("no {key} of {path:?} in {value}"))
    })
}
