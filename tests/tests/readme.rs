//! What the README copies from elsewhere is the same there, and what it points at exists.
#![allow(
    clippy::disallowed_methods,
    reason = "it reads the files of the workspace"
)]

use std::fs;

use ratewright_tests::workspace;

fn text(path: &str) -> String {
    let path = workspace().join(path);
    fs::read_to_string(&path).unwrap_or_else(|fault| panic!("{}: {fault}", path.display()))
}

#[test]
fn the_table_of_metrics_is_the_one_of_the_code() {
    let readme = text("README.md");
    let code = text("server/daemon/src/metrics/mod.rs");
    let rows: Vec<_> = code
        .lines()
        .filter_map(|line| line.strip_prefix("//! "))
        .filter(|row| row.starts_with("| `"))
        .collect();
    assert!(rows.len() > 10, "the table has gone from the code");
    for row in rows {
        assert!(readme.lines().any(|line| line == row), "missing: {row}");
    }
}

#[test]
fn relative_links_lead_somewhere() {
    for page in ["README.md", "DEVELOPERS.md"] {
        let text = text(page);
        let links = text
            .split("](")
            .skip(1)
            .filter_map(|rest| rest.split(')').next());
        for link in links.filter(|link| !link.contains("://")) {
            let file = link.split('#').next().unwrap_or(link);
            assert!(workspace().join(file).exists(), "{page} points at {link}");
        }
    }
}
