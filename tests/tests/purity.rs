//! The pure crates stay pure: nothing that waits, listens, opens files or draws lots is in
//! their dependency trees. (`clippy.toml` bans the calls of the standard library.)

use ratewright_tests::dependencies;

const PURE: [&str; 7] = [
    "ratewright-ratio",
    "ratewright-timing",
    "ratewright-control",
    "ratewright-declarations",
    "ratewright-rehearsal",
    "ratewright-pictures",
    "ratewright-handle",
];

const IMPURE: [&str; 15] = [
    "async-std",
    "axum",
    "getrandom",
    "hyper",
    "mio",
    "rand",
    "reqwest",
    "rusqlite",
    "rustix",
    "smol",
    "socket2",
    "tokio",
    "tonic",
    "ureq",
    "uuid",
];

#[test]
fn no_pure_crate_depends_on_the_outside_world() {
    for pure in PURE {
        let tree = dependencies(pure);
        assert!(
            tree.iter().any(|name| name == pure),
            "{pure} is missing from its own tree"
        );
        for impure in IMPURE {
            assert!(
                !tree.iter().any(|name| name == impure),
                "{pure} depends on {impure}"
            );
        }
    }
}

#[test]
fn ratio_and_timing_know_nothing_of_each_other_nor_of_the_wire() {
    for (pure, stranger) in [
        ("ratewright-ratio", "ratewright-timing"),
        ("ratewright-timing", "ratewright-ratio"),
        ("ratewright-control", "ratewright-proto"),
        ("ratewright-client", "ratewright-timing"),
        ("ratewright-client", "ratewright-control"),
    ] {
        let tree = dependencies(pure);
        assert!(
            !tree.iter().any(|name| name == stranger),
            "{pure} depends on {stranger}"
        );
    }
}

#[test]
fn the_check_can_fail() {
    assert!(
        dependencies("ratewright-client")
            .iter()
            .any(|name| name == "tokio")
    );
}
